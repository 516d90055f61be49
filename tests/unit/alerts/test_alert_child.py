"""A program's input, output and end."""

import sys
import threading

import pytest

from auditd.alerts.child import OUTPUT_LIMIT_BYTES, run_child


def run(script, folder, given=b"", **options):
    return run_child(
        [sys.executable, "-I", "-c", script],
        given=given,
        environ={},
        folder=folder,
        timeout_s=60,
        stop=threading.Event(),
        **options,
    )


def test_of_a_flood_so_much_is_kept_and_the_program_ends_by_itself(tmp_path):
    """The beginning; the rest is read and dropped."""
    ended = run("import sys; sys.stdout.write('ab' + 'x' * 5_000_000)", tmp_path)
    assert (ended.how, ended.code) == ("itself", 0)
    assert len(ended.output) == OUTPUT_LIMIT_BYTES
    assert ended.output.startswith(b"abxx")


def test_input_larger_than_a_pipe_reaches_the_program_and_one_that_reads_none_is_no_trouble(tmp_path):
    """No deadlock whichever side is slow."""
    body = b"y" * 3_000_000
    assert run("import sys; print(len(sys.stdin.buffer.read()))", tmp_path, body).output == b"3000000\n"
    assert run("", tmp_path, body).code == 0


def test_errors_are_read_with_the_output_or_dropped(tmp_path):
    """As asked."""
    script = "import sys; print('out', flush=True); print('err', file=sys.stderr)"
    assert run(script, tmp_path).output == b"out\nerr\n"
    assert run(script, tmp_path, merge_errors=False).output == b"out\n"


@pytest.mark.parametrize(
    ("script", "code"), [("raise SystemExit(7)", 7), ("import os; os.kill(os.getpid(), 9)", -9)]
)
def test_the_code_tells_an_exit_status_or_a_signal(tmp_path, script, code):
    """Negative for a signal."""
    assert run(script, tmp_path).code == code


def test_a_program_that_closes_its_output_is_still_waited_for(tmp_path):
    """Its end is what counts."""
    ended = run("import os, time; os.close(1); os.close(2); time.sleep(0.5); os._exit(4)", tmp_path)
    assert (ended.how, ended.code, ended.output) == ("itself", 4, b"")
