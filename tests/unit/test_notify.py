"""Datagrams to a real socket, as systemd would read them (sd_notify(3), sd_watchdog_enabled(3))."""

import os
import secrets
import socket
import time

import pytest

from auditd.notify import Notifier, watchdog_interval_s


@pytest.fixture(params=["path", "abstract"])
def line(request, tmp_path):
    """A bound datagram socket and the name under which it is told of."""
    name = f"@auditd-test-{secrets.token_hex(8)}" if request.param == "abstract" else str(tmp_path / "notify")
    with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as listening:
        listening.bind(name.replace("@", "\0", 1) if request.param == "abstract" else name)
        listening.settimeout(2)
        yield listening, name


def test_each_message_is_one_datagram_in_systemds_words(line):
    """READY with a status, WATCHDOG, STATUS, STOPPING."""
    listening, name = line
    notifier = Notifier({"NOTIFY_SOCKET": name})
    assert notifier.is_listened_to
    notifier.ready("first scan done")
    assert listening.recv(4096) == b"READY=1\nSTATUS=first scan done"
    notifier.ready()
    assert listening.recv(4096) == b"READY=1"
    notifier.watchdog()
    assert listening.recv(4096) == b"WATCHDOG=1"
    notifier.status("12 runs")
    assert listening.recv(4096) == b"STATUS=12 runs"
    notifier.stopping()
    assert listening.recv(4096) == b"STOPPING=1"


def test_a_reload_says_when_it_began(line):
    """Type=notify-reload needs the monotonic clock in microseconds."""
    listening, name = line
    before = time.monotonic_ns() // 1000
    Notifier({"NOTIFY_SOCKET": name}).reloading()
    first, second = listening.recv(4096).decode().split("\n")
    assert first == "RELOADING=1"
    assert before <= int(second.removeprefix("MONOTONIC_USEC=")) <= time.monotonic_ns() // 1000


def test_a_status_with_a_line_break_cannot_say_something_else(line):
    """A run's name in a status line stays in the status line."""
    listening, name = line
    Notifier({"NOTIFY_SOCKET": name}).status("run a\nSTOPPING=1\x1b[2J")
    assert listening.recv(4096) == b"STATUS=run a STOPPING=1 [2J"


@pytest.mark.parametrize("environ", [{}, {"NOTIFY_SOCKET": ""}, {"NOTIFY_SOCKET": "vsock:2:1"}])
def test_without_systemd_nothing_is_told_and_nothing_fails(environ):
    """Under nohup and in a terminal multiplexer."""
    notifier = Notifier(environ)
    assert not notifier.is_listened_to
    notifier.ready()
    notifier.watchdog()
    notifier.stopping()
    notifier.reloading()
    notifier.status("x")


def test_a_manager_that_went_away_is_no_error(tmp_path):
    """The socket's file is gone."""
    Notifier({"NOTIFY_SOCKET": str(tmp_path / "gone")}).watchdog()


def test_a_full_socket_holds_the_daemon_up_for_a_second_at_most(line):
    """The manager reads nothing."""
    _, name = line
    notifier = Notifier({"NOTIFY_SOCKET": name})
    began = time.monotonic()
    for _ in range(2000):
        if time.monotonic() - began > 0.9:
            break
        notifier.status("x" * 500)
    assert time.monotonic() - began < 3


@pytest.mark.parametrize(
    ("environ", "expected"),
    [
        ({}, None),
        ({"WATCHDOG_USEC": "30000000"}, 15.0),
        ({"WATCHDOG_USEC": "30000000", "WATCHDOG_PID": str(os.getpid())}, 15.0),
        ({"WATCHDOG_USEC": "30000000", "WATCHDOG_PID": "1"}, None),
        ({"WATCHDOG_USEC": "0"}, None),
        ({"WATCHDOG_USEC": "soon"}, None),
    ],
)
def test_the_watchdog_is_fed_at_half_its_limit(environ, expected):
    """As sd_watchdog_enabled(3) recommends, and only by the process that is meant."""
    assert watchdog_interval_s(environ) == expected
