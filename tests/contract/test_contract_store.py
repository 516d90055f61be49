"""What every store does, whatever it is kept in: SQLite and a real PostgreSQL server."""

import threading

import pytest
from sqlalchemy.engine import URL
from sqlalchemy.exc import DBAPIError
from store_records import START, make_caution, make_run

from auditd.errors import StoreHeld, StoreNewer
from auditd.records import GRADES
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
from auditd.store.runs import (
    ConfigRows,
    count_runs,
    give_positions,
    insert_runs,
)
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
from auditd.store.verify import verify_store

NOW_US = to_us(START)


def insert(connection, numbers, first_arrival=0, **changed):
    batch = [(make_run(number, **changed), True) for number in numbers]
    return insert_runs(
        connection, batch, landed_us=NOW_US, config_rows=ConfigRows(), first_arrival=first_arrival
    )


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
