"""What every store does, whatever it is kept in: SQLite and a real PostgreSQL server."""

import math
import threading

import pytest
from sqlalchemy import select
from sqlalchemy.engine import URL
from sqlalchemy.exc import DBAPIError
from store_records import START, make_caution, make_run

from auditd.errors import StoreHeld, StoreNewer
from auditd.records import GRADES, Refusal, Source
from auditd.store.answers import apply_from, save_answer, stored_answers
from auditd.store.cautions import (
    caution_number,
    save_caution,
    standing_by_grade,
    stored_cautions,
    update_caution,
)
from auditd.store.clock import to_us
from auditd.store.engine import open_engine
from auditd.store.lock import Holder
from auditd.store.looks import save_look, stored_looks
from auditd.store.migrate import open_or_make
from auditd.store.outbox import (
    count_letters,
    due_letters,
    last_error,
    mark_delivered,
    mark_failed,
    next_due_us,
    postpone_letters,
    put_letter,
)
from auditd.store.plans import plan_versions, save_epoch, save_plan_version, stored_epochs
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
from auditd.store.states import (
    Checkpoint,
    save_beat,
    save_checkpoint,
    save_display,
    save_flush,
    stored_beats,
    stored_checkpoint,
    stored_display,
    stored_flushes,
)
from auditd.store.tables import runs
from auditd.store.verify import verify_store

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


def test_one_condition_is_one_warning_that_changes_and_is_never_deleted(engine):
    """Its id stays; grade, state and answer follow."""
    with engine.begin() as connection:
        caution = save_caution(connection, make_caution(), epoch=1)
        assert save_caution(connection, make_caution(), epoch=1) is None
        other = save_caution(connection, make_caution("gap:1", grade="note"), epoch=1)
    assert (caution.id, other.id) == ("W1", "W2")
    changed = make_caution(id=caution.id, grade="severe", state="answered", evidence_loss=None)
    with engine.begin() as connection:
        update_caution(connection, changed, changed_us=NOW_US + 1)
        save_answer(
            connection,
            caution=1,
            answered_us=NOW_US,
            reason="repaired",
            action="restart",
            scope={"host": "n3"},
        )
    with engine.connect() as connection:
        first, second = stored_cautions(connection)
        assert (first.id, first.grade, first.state, first.answer) == ("W1", "severe", "answered", "repaired")
        assert second == other
        assert standing_by_grade(connection) == {grade: int(grade == "note") for grade in GRADES}


@pytest.mark.parametrize(
    ("name", "number"), [("W7", 7), ("w7", 7), ("7", None), ("W", None), ("W७", None), ("", None)]
)
def test_a_warnings_id_is_read_strictly(name, number):
    """Other scripts' digits are no ids."""
    assert caution_number(name) == number


def test_an_answer_applies_from_a_position_that_is_stored_later(engine):
    """Any process appends it; the auditor says from where."""
    with engine.begin() as connection:
        save_caution(connection, make_caution(), epoch=1)
        save_answer(
            connection, caution=1, answered_us=NOW_US, reason="é", action="set-aside", scope={"host": "n3"}
        )
    with engine.begin() as connection:
        [answer] = stored_answers(connection)
        assert (answer.from_position, answer.scope, answer.answered_at) == (None, {"host": "n3"}, START)
        apply_from(connection, answer.row, 17)
        assert [one.from_position for one in stored_answers(connection)] == [17]


def test_an_answer_to_a_warning_that_is_not_there_is_refused_by_the_store(engine):
    """Foreign keys hold."""
    with pytest.raises(DBAPIError), engine.begin() as connection:
        save_answer(connection, caution=99, answered_us=NOW_US, reason="x", action="noted", scope={})


def test_letters_go_from_due_to_delivered_or_dead(engine):
    """One id is one letter; what waits, waits until its time."""
    with engine.begin() as connection:
        save_caution(connection, make_caution(), epoch=1)
        for alert_id in ("a", "b", "a"):
            put_letter(
                connection,
                alert_id=alert_id,
                caution=1,
                target="command:0",
                body={"id": "W1"},
                created_us=NOW_US,
            )
        first, second = due_letters(connection, NOW_US)
        assert due_letters(connection, NOW_US - 1) == []
        assert (first.alert_id, first.body, first.n_tries, first.created_at) == ("a", {"id": "W1"}, 0, START)
        mark_failed(connection, [first.row], error="no route", due_us=NOW_US + 50, dead=False)
        postpone_letters(connection, [second.row], NOW_US + 90)
    with engine.begin() as connection:
        assert next_due_us(connection) == NOW_US + 50
        assert last_error(connection) == "no route"
        assert [letter.n_tries for letter in due_letters(connection, NOW_US + 90)] == [1, 0]
        mark_delivered(connection, [first.row], NOW_US + 60)
        mark_failed(connection, [second.row], error="gone", due_us=0, dead=True)
    with engine.connect() as connection:
        assert count_letters(connection) == {"due": 0, "delivered": 1, "dead": 1}
        assert next_due_us(connection) is None
        assert last_error(connection) == "gone"


def test_plan_versions_and_epochs_count_from_one_and_are_kept(engine):
    """Text, reason and from where each holds."""
    with engine.begin() as connection:
        for number, reason in ((1, None), (2, "wider margin")):
            version = save_plan_version(
                connection,
                digest=f"h{number}",
                text="x = 'ü'",
                reason=reason,
                taken_us=NOW_US,
                from_position=number,
            )
            assert version == number
        epoch = save_epoch(
            connection, opened_us=NOW_US, from_position=3, plan_version=2, key=b"\x00\xffkey", reason="r",
            scope={"host": "n3"},
        )  # fmt: skip
    with engine.connect() as connection:
        assert [(v.version, v.reason, v.taken_at) for v in plan_versions(connection)] == [
            (1, None, START),
            (2, "wider margin", START),
        ]
        [kept] = stored_epochs(connection)
        assert (kept.epoch, epoch, kept.key, kept.scope) == (1, 1, b"\x00\xffkey", {"host": "n3"})


def test_states_are_replaced_and_looks_and_flushes_appended(engine):
    """Checkpoints, displays and signs of life have one value; looks and flushes a history."""
    with engine.begin() as connection:
        for position in (1, 2):
            save_checkpoint(
                connection, "error", Checkpoint(epoch=1, position=position, body=bytes([position]))
            )
            save_display(connection, "status", NOW_US, {"n": position})
            save_beat(connection, "auditor", pid=position, host="n1", at_us=NOW_US, body={"watch": "events"})
            save_flush(connection, at_us=NOW_US, position=position, n_runs=4, reason="gather ended")
            assert (
                save_look(connection, looked_us=NOW_US, command="compare", n_runs=9, body={"a": 1})
                == position
            )
    with engine.connect() as connection:
        assert stored_checkpoint(connection, "error") == Checkpoint(epoch=1, position=2, body=b"\x02")
        assert stored_checkpoint(connection, "other") is None
        assert stored_display(connection, "status") == {"n": 2}
        assert stored_display(connection, "other") is None
        beat = stored_beats(connection)["auditor"]
        assert (beat.pid, beat.host, beat.at, beat.body) == (2, "n1", START, {"watch": "events"})
        assert [flush[1] for flush in stored_flushes(connection)] == [1, 2]
        assert [(look.at, look.command, look.n_runs, look.body) for look in stored_looks(connection)] == [
            (START, "compare", 9, {"a": 1})
        ] * 2


def test_single_values_are_shown_to_a_user_with_a_database_shell(engine):
    """The view `run_values` has a row a response."""
    with engine.begin() as connection:
        insert(connection, [1], responses={"a": 1.5, "b": math.nan})
        rows = connection.exec_driver_sql(
            "SELECT id, response, value FROM run_values ORDER BY response"
        ).all()
    assert [(row[0], row[1], str(row[2])) for row in rows] == [("r1", "a", "1.5"), ("r1", "b", "NaN")]


def test_a_fresh_and_a_used_store_verify(engine, store_address):
    """No complaint where nothing is wrong."""
    assert verify_store(store_address) == []
    with engine.begin() as connection:
        stored = insert(connection, range(30)).stored
        give_positions(connection, [(run.row, place) for place, run in enumerate(stored[:20])])
        save_caution(connection, make_caution(), epoch=1)
    assert verify_store(store_address) == []


@pytest.mark.parametrize(
    ("damage", "said"),
    [
        ("UPDATE runs SET position = 40 WHERE position = 4", "have a position, from 0 to 40"),
        ("UPDATE runs SET arrival = NULL WHERE position = 4", "have a position, but were not taken up"),
        ("UPDATE runs SET late = true WHERE position = 4", "are late and have a position"),
        (
            "UPDATE runs SET responses = '{\"a\": 1' WHERE position = 4",
            "runs.responses of row 5 does not decode",
        ),
        ("UPDATE runs SET metadata = 'x' WHERE position = 4", "runs.metadata of row 5 does not decode"),
        ("UPDATE configs SET cell = '[1]'", "configs.cell of row 1 does not decode"),
        ("UPDATE cautions SET body = '{}'", "cautions.body of number 1 does not decode"),
        ("UPDATE checkpoints SET position = 9", "covers 9 runs, but 8 have a place"),
        ("INSERT INTO chunks VALUES (6, 3, '')", "the chunk at 6 ends beyond the last place 7"),
        ("UPDATE epochs SET epoch = 2", "1 epochs are numbered 2 to 2"),
        ("UPDATE epochs SET plan_version = 2", "1 epochs name a plan version that is not there"),
    ],
)
def test_what_is_wrong_is_found(engine, store_address, damage, said):
    """Each thing that is checked, broken once."""
    with engine.begin() as connection:
        stored = insert(connection, range(8)).stored
        give_positions(connection, [(run.row, place) for place, run in enumerate(stored)])
        save_caution(connection, make_caution(), epoch=1)
        save_checkpoint(connection, "error", Checkpoint(epoch=1, position=8, body=b""))
        save_plan_version(connection, digest="h", text="", reason=None, taken_us=0, from_position=0)
        save_epoch(connection, opened_us=0, from_position=0, plan_version=1, key=b"", reason="", scope={})
    assert verify_store(store_address) == []
    with engine.begin() as connection:
        connection.exec_driver_sql(damage)
    complaints = verify_store(store_address)
    assert any(said in complaint for complaint in complaints), complaints


def test_one_holder_at_a_time_is_named_to_the_second_and_leaves_the_right_behind(engine, store_address):
    """The second is refused with the first's name; after the first it is let in."""
    with Holder(store_address, engine) as first:
        assert first.holds()
        with pytest.raises(StoreHeld, match=r"is held by .*\d+ on "), Holder(store_address, engine):
            pass
    assert not first.holds()
    with Holder(store_address, engine) as second:
        assert second.holds()


def test_starters_at_the_same_time_make_one_store(store_address):
    """Four threads open what is not there; all get the same store."""
    made, barrier = [], threading.Barrier(4)

    def start():
        barrier.wait()
        made.append(open_or_make(store_address))

    threads = [threading.Thread(target=start) for _ in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(made) == 4
    with made[0].begin() as connection:
        insert(connection, [1])
    with made[3].connect() as connection:
        assert count_runs(connection).n == 1
    for engine in made:
        engine.dispose()


def test_a_newer_store_is_refused_for_reading_and_for_taking(engine, store_address):
    """By its revision, with the way out."""
    with engine.begin() as connection:
        connection.exec_driver_sql("UPDATE alembic_version SET version_num = '9999'")
    engine.dispose()
    for opening in (open_engine, open_or_make):
        with pytest.raises(StoreNewer, match="use the newer release"):
            opening(store_address)


def test_a_reader_of_a_file_cannot_write(tmp_path):
    """Queries open it so that a mistake in them changes nothing; a server has rights of its own."""
    address = URL.create("sqlite", database=str(tmp_path / "store.sqlite"))
    open_or_make(address).dispose()
    reading = open_engine(address, read_only=True)
    with pytest.raises(DBAPIError), reading.begin() as connection:
        insert(connection, [1])


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
