"""How every store keeps runs, sources and refusals: SQLite and a real PostgreSQL server."""

import math
import threading

import pytest
from sqlalchemy import select
from sqlalchemy.exc import DBAPIError
from store_records import START, make_run

from auditd.records import Refusal, Source
from auditd.store.clock import to_us
from auditd.store.engine import open_engine
from auditd.store.refusals import count_refusals, save_refusals, stored_refusals, take_up_refusals
from auditd.store.runs import (
    ConfigRows,
    count_runs,
    give_arrivals,
    give_positions,
    insert_runs,
    mark_late,
    stored_runs,
)
from auditd.store.sources import save_source, stored_sources
from auditd.store.tables import runs

NOW_US = to_us(START)


def insert(connection, numbers, first_arrival=0, **changed):
    batch = [(make_run(number, **changed), True) for number in numbers]
    return insert_runs(
        connection, batch, landed_us=NOW_US, config_rows=ConfigRows(), first_arrival=first_arrival
    )


def test_a_run_comes_back_as_it_was_kept(engine):
    """Every field, with NaN and infinities, odd levels, metadata, and times before 1970."""
    run = make_run(
        1,
        id="naïve \N{SNOWMAN} 'quoted' \"id\"",
        sequence=2**62,
        started=START.replace(year=1969, microsecond=123457),
        seed="340282366920938463463374607431768211455",
        parent="r0",
        status="ok",
        stage="s1",
        completed=False,
        cell={"mesh": 1, "solver": "1", "adaptive": True, "tolerance": 0.1, "none": None},
        responses={"a": math.inf, "b": -math.inf, "c": math.nan, "d": 0.1 + 0.2, "e": 5e-324},
        metadata={"deep": [{"x": [1, 2.5, None, "z"]}], "nul": "a\x00b"},
    )
    with engine.begin() as connection:
        inserted = insert_runs(
            connection, [(run, False)], landed_us=NOW_US, config_rows=ConfigRows(), first_arrival=0
        )
        [kept] = stored_runs(connection)
    assert repr(kept.run) == repr(run)
    assert (kept.arrival, kept.position, kept.late, kept.ordered) == (0, None, False, False)
    assert repr(inserted.stored) == repr((kept,))


def test_a_run_is_kept_exactly_once_and_a_rewrite_is_refused(engine):
    """The same content is passed over, other content refused, within a batch and between batches."""
    first, other = make_run(1), make_run(1, responses={"error": 9.0})
    with engine.begin() as connection:
        within = insert_runs(
            connection,
            [(first, True), (first, True), (other, True)],
            landed_us=NOW_US,
            config_rows=ConfigRows(),
            first_arrival=0,
        )
    with engine.begin() as connection:
        between = insert_runs(
            connection,
            [(other, True), (first, True)],
            landed_us=NOW_US,
            config_rows=ConfigRows(),
            first_arrival=1,
        )
        kept = list(stored_runs(connection))
    for inserted, n_stored in ((within, 1), (between, 0)):
        assert len(inserted.stored) == n_stored
        assert inserted.n_seen_before == 1
        [refusal] = inserted.rewritten
        assert (refusal.kind, refusal.id) == ("rewrite", "r1")
    assert [stored.run.digest for stored in kept] == [first.digest]


def test_a_transaction_that_is_rolled_back_leaves_nothing(engine):
    """Runs and how far their file was read go together."""
    source = Source(path="a", device=1, inode=2, size=9, mtime_ns=3, offset=9, n_records=3)

    def half():
        with engine.begin() as connection:
            insert(connection, range(3))
            save_source(connection, source)
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        half()
    with engine.connect() as connection:
        assert count_runs(connection).n == 0
        assert list(stored_sources(connection)) == []


def test_runs_without_arrival_are_taken_up_in_the_order_of_insertion(engine):
    """What collectors insert, the auditor numbers, beside what it inserted itself."""
    with engine.begin() as connection:
        insert(connection, [5], first_arrival=0)
        assert insert(connection, [9, 3, 7], first_arrival=None).stored == ()
    with engine.begin() as connection:
        taken = list(give_arrivals(connection, count_runs(connection).next_arrival))
    assert [(run.run.id, run.arrival) for run in taken] == [("r9", 1), ("r3", 2), ("r7", 3)]
    with engine.begin() as connection:
        assert list(give_arrivals(connection, 4)) == []
        insert(connection, [11], first_arrival=4)
        insert(connection, [12], first_arrival=None)
        assert [run.arrival for run in give_arrivals(connection, 5)] == [5]
        assert [stored.run.id for stored in stored_runs(connection)] == ["r5", "r9", "r3", "r7", "r11", "r12"]


@pytest.mark.parametrize(
    ("by", "expected"),
    [
        ("arrival", ["r3", "r1", "r4", "r2"]),
        ("sequence", ["r2", "r4", "r3", "r1"]),
        ("started", ["r1", "r2", "r4", "r3"]),
    ],
)
def test_a_backfill_is_taken_up_in_the_order_in_which_it_was_made(engine, by, expected):
    """By sequence or start, what states none of it last, and in the order of insertion among equals."""
    stated = {
        3: {"sequence": 7, "started": None, "finished": None},
        1: {"sequence": None},
        4: {"sequence": 2, "started": None, "finished": make_run(4).started},
        2: {"sequence": 1},
    }
    with engine.begin() as connection:
        for number, fields in stated.items():
            insert(connection, [number], first_arrival=None, **fields)
        assert [stored.run.id for stored in give_arrivals(connection, 0, by)] == expected


def test_positions_lateness_and_counts(engine):
    """A place is given once; the next free numbers are told without reading the runs."""
    with engine.begin() as connection:
        stored = insert(connection, range(5)).stored
        insert(connection, [7], first_arrival=5, completed=False)
        insert(connection, [8], first_arrival=None)
        give_positions(connection, [(stored[2].row, 0), (stored[0].row, 1)])
        mark_late(connection, [stored[4].row])
        give_positions(connection, [])
        mark_late(connection, [])
    with engine.connect() as connection:
        counts = count_runs(connection)
        placed = list(stored_runs(connection, runs.c.position.is_not(None), order=runs.c.position))
    assert (counts.n, counts.n_completed, counts.n_late, counts.n_placed, counts.n_arrived) == (7, 6, 1, 2, 6)
    assert (counts.next_arrival, counts.next_position) == (6, 2)
    assert [one.run.id for one in placed] == ["r2", "r0"]


def test_no_place_is_given_twice(engine):
    """The store itself refuses a second run at a position or arrival, whatever the program does."""
    with engine.begin() as connection:
        stored = insert(connection, range(2)).stored
        give_positions(connection, [(stored[0].row, 0)])
    with pytest.raises(DBAPIError), engine.begin() as connection:
        give_positions(connection, [(stored[1].row, 0)])
    with pytest.raises(DBAPIError), engine.begin() as connection:
        insert(connection, [9], first_arrival=1)


def test_more_ids_than_one_statement_takes_are_looked_up(engine):
    """Beyond SQLite's oldest limit on parameters."""
    with engine.begin() as connection:
        insert(connection, range(2500))
        again = insert(connection, range(2500), first_arrival=2500)
    assert (again.stored, again.n_seen_before) == ((), 2500)


def test_a_source_is_kept_once_a_path_and_machine(engine):
    """The newest state replaces the older one; machines do not touch each other's."""
    old = Source(
        path="ä b", device=1, inode=2**63 - 1, size=9, mtime_ns=3, offset=9, n_records=3, head=b"\x00\xff"
    )
    new = Source(path="ä b", device=1, inode=4, size=19, mtime_ns=4, offset=19, n_records=5, context=b"ctx")
    with engine.begin() as connection:
        save_source(connection, old)
        save_source(connection, new)
        save_source(connection, old, machine="n2")
    with engine.connect() as connection:
        assert list(stored_sources(connection)) == [new]
        assert list(stored_sources(connection, "n2")) == [old]


def test_a_refusal_is_kept_once_and_taken_up_once(engine):
    """A file that is read again refuses nothing anew; the auditor sees collectors' refusals once."""
    one = Refusal(path="a", offset=0, number=0, reason="not JSON", kind="read")
    two = Refusal(path="a", offset=9, number=1, reason="no id", id="r1")
    with engine.begin() as connection:
        assert save_refusals(connection, [one, two], NOW_US, taken_up=False) == [one, two]
        assert save_refusals(connection, [one], NOW_US, taken_up=False) == []
        assert take_up_refusals(connection) == [one, two]
        assert take_up_refusals(connection) == []
    with engine.connect() as connection:
        assert [kept.refusal for kept in stored_refusals(connection)] == [two, one]
        assert [kept.refusal for kept in stored_refusals(connection, 1)] == [two]
        assert count_refusals(connection) == 2


def test_single_values_are_shown_to_a_user_with_a_database_shell(engine):
    """The view `run_values` has a row a response."""
    with engine.begin() as connection:
        insert(connection, [1], responses={"a": 1.5, "b": math.nan})
        rows = connection.exec_driver_sql(
            "SELECT id, response, value FROM run_values ORDER BY response"
        ).all()
    assert [(row[0], row[1], str(row[2])) for row in rows] == [("r1", "a", "1.5"), ("r1", "b", "NaN")]


def test_readers_see_a_whole_state_while_a_writer_writes(engine, store_address):
    """Every reading has all runs of a batch or none."""
    reading, stop, wrong = open_engine(store_address, read_only=True), threading.Event(), []

    def read():
        while not stop.is_set():
            with reading.connect() as connection:
                n = len(connection.execute(select(runs.c.id)).all())
            if n % 10:
                wrong.append(n)

    reader = threading.Thread(target=read)
    reader.start()
    for start in range(0, 300, 10):
        with engine.begin() as connection:
            insert(connection, range(start, start + 10), first_arrival=start)
    stop.set()
    reader.join()
    reading.dispose()
    assert wrong == []
