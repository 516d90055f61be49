"""One PostgreSQL store, collectors on several machines, auditors that take over; all of them fail."""

import json
import threading
import time
from contextlib import ExitStack, contextmanager

import pytest
from campaigns_made import PLAN, append, lay_out, records, runaudit
from sqlalchemy import create_engine, text
from sqlalchemy.exc import DBAPIError
from sqlalchemy.pool import NullPool
from watching import Watch, until

pytestmark = [pytest.mark.slow, pytest.mark.timeout(240)]

TAKE_OVER_S = 30.0
"""The longest that a campaign may be without an auditor."""


@pytest.fixture
def machines(tmp_path, postgres_url):
    """Lay out a folder for each machine, with one plan and one store."""
    text_of_plan = PLAN.replace('by = "started"', 'by = "arrival"').replace('patience = "30m"', "")
    text_of_plan += f'\n[store]\nurl = "{postgres_url.render_as_string(hide_password=False)}"\n'
    return lambda *names: [lay_out(tmp_path / name, text_of_plan) for name in names]


@pytest.fixture
def asked(postgres_url):
    """Ask the store itself; None while the server is away."""
    engine = create_engine(postgres_url, poolclass=NullPool)

    def ask(query):
        try:
            with engine.connect() as connection:
                return connection.execute(text(query)).fetchall()
        except DBAPIError:
            return None

    return ask


def collector(plan, name):
    return Watch(plan, "--collect-only", env={"RUNAUDIT_MACHINE": name}, name=name)


def n_placed(asked):
    found = asked("SELECT count(position) FROM runs")
    return found[0][0] if found else -1


def each_once(asked, n):
    """Say whether n runs are there, each once, with places without a gap."""
    query = (
        "SELECT count(*), count(DISTINCT id), count(DISTINCT arrival), max(arrival), "
        "count(DISTINCT position), max(position) FROM runs"
    )
    return tuple(asked(query)[0]) == (n, n, n, n - 1, n, n - 1)


@contextmanager
def landing(folders, made, pause_s=0.15):
    """Land runs from a thread, ten at a time on one machine after the other; yield what makes it hurry."""
    hurry = threading.Event()

    def write():
        for number, start in enumerate(range(0, len(made), 10)):
            append(folders[number % len(folders)], made[start : start + 10])
            hurry.wait(pause_s)

    writer = threading.Thread(target=write)
    writer.start()

    def end():
        assert writer.is_alive(), "all had landed before: nothing was under load"
        hurry.set()
        writer.join()

    try:
        yield end
    finally:
        hurry.set()
        writer.join()


@contextmanager
def lock_watch(asked):
    """Note how many hold the auditor's lock at once, and the longest time that nobody did."""
    stop, seen = threading.Event(), {"most": 0, "free_s": 0.0}
    query = (
        "SELECT count(*) FROM pg_locks WHERE locktype = 'advisory' AND granted AND objid = x'72756E61'::int "
        "AND database = (SELECT oid FROM pg_database WHERE datname = current_database())"
    )

    def look():
        free_since = None
        while not stop.wait(0.05):
            found = asked(query)
            if found is None:
                continue
            seen["most"] = max(seen["most"], found[0][0])
            if found[0][0]:
                free_since = None
            elif free_since is None:
                free_since = time.monotonic()
            else:
                seen["free_s"] = max(seen["free_s"], time.monotonic() - free_since)

    thread = threading.Thread(target=look)
    thread.start()
    try:
        yield seen
    finally:
        stop.set()
        thread.join()


def test_collectors_auditors_and_the_server_fail_and_every_run_is_taken_once(
    machines, asked, postgres_server
):
    """One collector and the auditor are killed, the server is restarted under load: each run once."""
    first, second, *auditors = machines("first", "second", "auditor", "reserve")
    made = records(3_000, seed=5)
    with ExitStack() as stack:
        auditor = stack.enter_context(Watch(auditors[0], name="auditor"))
        auditor.await_said("watching")
        reserve = stack.enter_context(Watch(auditors[1], name="reserve"))
        reserve.await_said("standing by")
        collectors = [stack.enter_context(collector(plan, plan.parent.name)) for plan in (first, second)]
        for one in collectors:
            one.await_said("collecting")
        seen = stack.enter_context(lock_watch(asked))
        end_landing = stack.enter_context(landing([first.parent, second.parent], made))
        until(lambda: n_placed(asked) > 100)
        collectors[0].kill()
        collectors[0].start()
        auditor.kill()
        killed_at, n_before = time.monotonic(), n_placed(asked)
        reserve.await_said("taking over", TAKE_OVER_S)
        until(lambda: n_placed(asked) > n_before, TAKE_OVER_S)
        assert time.monotonic() - killed_at < TAKE_OVER_S
        auditor.start()
        auditor.await_said("standing by")
        until(lambda: collectors[0].said.count("collecting") == 2)
        postgres_server.stop("fast")
        time.sleep(2)
        postgres_server.start()
        until(lambda: all("paused: " in one.said for one in collectors))
        end_landing()
        until(lambda: n_placed(asked) == len(made), 60, lambda: (auditor.said, reserve.said))
        assert each_once(asked, len(made))
        assert seen["most"] == 1
        assert seen["free_s"] < TAKE_OVER_S
        assert all(one.said.count("paused: ") == 1 for one in collectors)
        assert [one.end() for one in (auditor, reserve, *collectors)] == [0, 0, 0, 0]


def test_a_rewrite_that_a_collector_meets_is_told_by_the_auditor(machines, asked):
    """A record with an id of another machine's and other content is refused there and raises `rewrite`."""
    first, second, at_auditor = machines("first", "second", "auditor")
    made = records(40, seed=6)
    with Watch(at_auditor, name="auditor") as auditor, collector(first, "first"), collector(second, "second"):
        append(first.parent, made)
        until(lambda: n_placed(asked) == len(made), 60, lambda: auditor.said)
        append(second.parent, [made[7] | {"out": {"energy": 5.0, "steps": 5.0}}, made[8]])
        until(lambda: asked("SELECT count(*) FROM cautions WHERE kind = 'rewrite'")[0][0] == 1)
        assert each_once(asked, len(made))
        found = json.loads(runaudit(at_auditor, "status", "--json").stdout)
        assert found["refused"] == 1
        assert found["daemon"]["alive"]


def test_a_dead_machine_is_noticed_by_the_server(postgres_url):
    """The server is asked for keepalives: by default a lock of a dead machine would hold for two hours."""
    from auditd.store.engine import connect_engine

    engine = connect_engine(postgres_url, read_only=False, durable=True)
    with engine.connect() as connection:
        idle, interval, count = (
            int(connection.exec_driver_sql(f"SHOW tcp_keepalives_{name}").scalar_one().rstrip("s"))
            for name in ("idle", "interval", "count")
        )
    engine.dispose()
    assert idle + interval * count < TAKE_OVER_S


def test_an_amendment_elsewhere_ends_a_collector_whose_plan_is_another(machines, asked):
    """A collector never goes on under a plan that is not in use; with the new plan it starts again."""
    first, at_auditor = machines("first", "auditor")
    with Watch(at_auditor, name="auditor") as auditor, collector(first, "first") as one:
        append(first.parent, records(10))
        until(lambda: n_placed(asked) == 10, 60, lambda: auditor.said)
        for plan in (at_auditor,):
            plan.write_text(plan.read_text().replace("margin = 0.2", "margin = 0.3"))
        assert runaudit(at_auditor, "amend", "the margin was stated wrongly").returncode == 0
        assert one.process.wait(30) == 78
        assert "amend" in one.said
        first.write_text(at_auditor.read_text())
        one.start()
        append(first.parent, records(20)[10:])
        until(lambda: n_placed(asked) == 20, 60, lambda: auditor.said)
        assert each_once(asked, 20)


def test_four_collectors_and_an_auditor_keep_up(machines, asked, record_property):
    """20,000 runs of four machines are all taken once; the rate is printed."""
    *plans, at_auditor = machines("m1", "m2", "m3", "m4", "auditor")
    n = 20_000
    made = records(n, seed=7)
    with ExitStack() as stack:
        auditor = stack.enter_context(Watch(at_auditor, name="auditor"))
        auditor.await_said("watching")
        collectors = [stack.enter_context(collector(plan, plan.parent.name)) for plan in plans]
        for one in collectors:
            one.await_said("collecting")
        began = time.monotonic()
        for number, plan in enumerate(plans):
            append(plan.parent, made[number::4])
        until(lambda: asked("SELECT count(*) FROM runs")[0][0] == n, 60, lambda: collectors[0].said)
        taken_s = time.monotonic() - began
        until(lambda: n_placed(asked) == n, 120, lambda: auditor.said)
        audited_s = time.monotonic() - began
        assert each_once(asked, n)
    print(f"taken at {n / taken_s:,.0f} runs/s, audited at {n / audited_s:,.0f} runs/s")
    record_property("runs_taken_a_second", n / taken_s)
    assert n / taken_s > 1_000
