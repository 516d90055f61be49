"""Collectors on a real PostgreSQL server: bulk, once, in order, from several processes at a time."""

import os
import random
import signal
import time

import pytest
from sqlalchemy import select
from store_records import make_run

from auditd.errors import StoreHeld
from auditd.store.collect import collect_runs
from auditd.store.engine import open_engine
from auditd.store.lock import Holder
from auditd.store.migrate import open_or_make
from auditd.store.runs import ConfigRows, count_runs, give_arrivals, insert_runs, stored_runs
from auditd.store.tables import configs, runs
from auditd.store.verify import verify_store


@pytest.fixture
def engine(postgres_url):
    """An engine on a new store on the server."""
    made = open_or_make(postgres_url)
    yield made
    made.dispose()


def collect(engine, batch):
    with engine.begin() as connection:
        return collect_runs(connection, [(run, True) for run in batch], landed_us=7)


def test_what_is_collected_comes_back_as_inserted_runs_do(engine):
    """Every kind of field through COPY, with configurations kept once."""
    odd = make_run(
        3, id="tab\tback\\slash \N{SNOWMAN}\nline", seed="1" * 40, sequence=-5, status=None, started=None,
        responses={"a": float("nan"), "b": float("-inf"), "c": 0.1 + 0.2}, metadata={"x": ["\t", None]},
        cell={"mesh": 1, "s": "a\nb\\"}, completed=False,
    )  # fmt: skip
    collected = collect(engine, [make_run(1), odd, make_run(2)])
    assert (collected.n_new, collected.n_seen_before, collected.rewritten) == (3, 0, ())
    with engine.begin() as connection:
        taken = list(give_arrivals(connection, 0))
        assert repr([stored.run for stored in taken]) == repr([make_run(1), odd, make_run(2)])
        assert [(stored.arrival, stored.landed_us, stored.ordered) for stored in taken] == [
            (0, 7, True),
            (1, 7, True),
            (2, 7, True),
        ]


def test_the_order_of_a_batch_is_the_order_of_arrival(engine):
    """Whatever the order of the ids, by which they are inserted."""
    numbers = random.Random(4).sample(range(1000), 300)
    collect(engine, [make_run(number) for number in numbers])
    with engine.begin() as connection:
        assert [stored.run.id for stored in give_arrivals(connection, 0)] == [
            f"r{number}" for number in numbers
        ]


def test_repeats_are_passed_over_and_rewrites_refused(engine):
    """Within a batch and between batches, as the auditor's own insertion does."""
    other = make_run(1, responses={"error": 9.0})
    within = collect(engine, [make_run(1), make_run(1), other, make_run(2)])
    assert (within.n_new, within.n_seen_before) == (2, 1)
    between = collect(engine, [other, make_run(2), make_run(3)])
    assert (between.n_new, between.n_seen_before) == (1, 1)
    for collected in (within, between):
        [refusal] = collected.rewritten
        assert (refusal.kind, refusal.id, refusal.path) == ("rewrite", "r1", other.path)
    with engine.begin() as connection:
        assert [stored.run.digest for stored in give_arrivals(connection, 0)] == [
            make_run(number).digest for number in (1, 2, 3)
        ]
    assert collect(engine, []).n_new == 0


def test_the_auditors_own_rows_and_the_collectors_do_not_collide(engine):
    """Both draw their rows from the server's sequence."""
    for number in range(0, 40, 2):
        with engine.begin() as connection:
            insert_runs(
                connection, [(make_run(number), True)], landed_us=1, config_rows=ConfigRows(),
                first_arrival=count_runs(connection).next_arrival,
            )  # fmt: skip
        assert collect(engine, [make_run(number + 1)]).n_new == 1
        with engine.begin() as connection:
            assert len(list(give_arrivals(connection, count_runs(connection).next_arrival))) == 1
    with engine.connect() as connection:
        assert [stored.run.id for stored in stored_runs(connection)] == [f"r{number}" for number in range(40)]


N_COLLECTORS = 4
N_EACH = 10_000
N_A_BATCH = 1000
N_SHARED = 500
"""Of its runs each collector has so many in common with all others, in another order."""


def collector(url, number):
    """Collect own runs and shared ones in batches, as one machine's process would."""
    engine = open_engine(url)
    own = [make_run(number * N_EACH + k) for k in range(N_EACH - N_SHARED)]
    shared = [make_run(10_000_000 + k) for k in range(N_SHARED)]
    mixed = own + shared
    random.Random(number).shuffle(mixed)
    began = time.monotonic()
    for start in range(0, N_EACH, N_A_BATCH):
        collect(engine, mixed[start : start + N_A_BATCH])
    engine.dispose()
    return time.monotonic() - began


def forked(action, *arguments):
    pid = os.fork()
    if pid == 0:
        code = 1
        try:
            action(*arguments)
            code = 0
        finally:
            os._exit(code)
    return pid


@pytest.mark.slow
def test_four_collectors_and_an_auditor_take_every_run_once(postgres_url, record_property):
    """Runs in common neither deadlock nor come twice; one collector is killed and does its work again."""
    open_or_make(postgres_url).dispose()
    began = time.monotonic()
    pids = [forked(collector, postgres_url, number) for number in range(N_COLLECTORS)]
    victim = forked(collector, postgres_url, 0)
    engine = open_engine(postgres_url)
    n_taken, expected = 0, N_COLLECTORS * (N_EACH - N_SHARED) + N_SHARED
    with Holder(postgres_url, engine):
        while n_taken < expected and time.monotonic() - began < 120:
            with engine.begin() as connection:
                n_taken += len(list(give_arrivals(connection, n_taken)))
            if victim and n_taken > expected / 4:
                os.kill(victim, signal.SIGKILL)
                os.waitpid(victim, 0)
                victim = 0
    rate = n_taken / (time.monotonic() - began)
    assert [os.waitpid(pid, 0)[1] for pid in pids] == [0] * N_COLLECTORS
    with engine.connect() as connection:
        counts = count_runs(connection)
        n_configs = len(connection.execute(select(configs.c.row)).all())
        arrivals = connection.execute(select(runs.c.arrival).order_by(runs.c.arrival)).scalars().all()
    engine.dispose()
    assert (counts.n, counts.n_arrived, n_taken) == (expected, expected, expected)
    assert arrivals == list(range(expected))
    assert n_configs == 6
    assert verify_store(postgres_url) == []
    record_property("runs_per_s", rate)
    print(f"\n{N_COLLECTORS} collectors and one auditor took {rate:,.0f} runs/s")


def test_the_auditors_right_passes_on_when_its_process_is_killed(engine, postgres_url):
    """By the end of its connection; until then the second is refused with the first's name."""
    read, write = os.pipe()

    def hold():
        own = open_engine(postgres_url)
        with Holder(postgres_url, own):
            os.write(write, b"!")
            time.sleep(60)

    pid = forked(hold)
    os.read(read, 1)
    with pytest.raises(StoreHeld, match=f"runaudit {pid} on "), Holder(postgres_url, engine):
        pass
    os.kill(pid, signal.SIGKILL)
    os.waitpid(pid, 0)
    os.close(read)
    os.close(write)
    deadline = time.monotonic() + 10
    while True:
        try:
            with Holder(postgres_url, engine) as holder:
                assert holder.holds()
                break
        except StoreHeld:
            assert time.monotonic() < deadline
            time.sleep(0.1)


def test_a_restarted_server_takes_the_right_away_and_it_can_be_taken_again(postgres_server, postgres_url):
    """`holds` tells it, and the engine reconnects by itself."""
    engine = open_or_make(postgres_url)
    with Holder(postgres_url, engine) as holder:
        collect(engine, [make_run(1)])
        postgres_server.restart()
        assert not holder.holds()
        holder.take_again()
        assert holder.holds()
        assert collect(engine, [make_run(1), make_run(2)]).n_new == 1
    engine.dispose()
