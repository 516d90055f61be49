"""Who gets a place when: by sequence, by start with patience, by arrival; and after a kill as without one."""

from datetime import timedelta

import msgspec
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from store_records import START, make_run

from auditd.plan_reading import parse_plan
from auditd.series.placing import (
    N_BEFORE_ZERO,
    N_DURATIONS_MIN,
    N_HIGHER,
    PATIENCE_FACTOR,
    PATIENCE_MIN_S,
    Placer,
)
from auditd.store.clock import to_us
from auditd.store.runs import StoredRun

PLAN = """
[responses.error]
at = "error"
[record]
sequence = "seq"
started = "start"
finished = "end"
[order]
by = "{by}"
patience = "{patience}"
"""


def make_placer(by, patience="auto"):
    return Placer(parse_plan(PLAN.format(by=by, patience=patience)))


def stored(arrival, *, minute=None, took=5, landed=None, **fields):
    """A run that arrived as the so-manieth; `minute` is its start, `took` minutes its duration."""
    if minute is not None:
        fields |= {
            "started": START + timedelta(minutes=minute),
            "finished": None if took is None else START + timedelta(minutes=minute + took),
        }
    landed_at = START + timedelta(minutes=arrival if landed is None else landed)
    return StoredRun(
        row=arrival + 1, arrival=arrival, position=None, late=False, ordered=True, landed_us=to_us(landed_at),
        run=make_run(arrival, **fields),
    )  # fmt: skip


def numbered(arrival, sequence, **fields):
    return stored(arrival, sequence=sequence, **fields)


def ids(runs):
    return [run.run.id for run in runs]


def add_all(placer, runs):
    for run in runs:
        placer.add(run)
    return placer.ready()


class TestByArrival:
    def test_a_run_enters_at_once_in_the_order_of_arrival(self):
        """Nothing waits."""
        placer = make_placer("arrival")
        placed = add_all(placer, [stored(0, minute=9), stored(1, minute=1)])
        assert ids(placed.entered) == ["r0", "r1"]
        assert (placed.late, placer.n_waiting) == ((), 0)


class TestBySequence:
    def test_a_run_waits_for_every_lower_number(self):
        """2 and 1 wait for 0."""
        placer = make_placer("sequence")
        assert add_all(placer, [numbered(0, 2), numbered(1, 1)]).entered == ()
        assert placer.n_waiting == 2
        assert ids(add_all(placer, [numbered(2, 0)]).entered) == ["r2", "r1", "r0"]

    def test_numbering_that_begins_at_one_is_recognised(self):
        """Number 0 is waited for until twenty runs have landed; from then on 1 is the first."""
        placer = make_placer("sequence")
        early = [numbered(k, k + 1) for k in range(N_BEFORE_ZERO - 1)]
        assert add_all(placer, early).entered == ()
        placed = add_all(placer, [numbered(N_BEFORE_ZERO - 1, N_BEFORE_ZERO)])
        assert ids(placed.entered) == [f"r{k}" for k in range(N_BEFORE_ZERO)]

    def test_a_zero_that_comes_in_time_is_first(self):
        """Among the first twenty, in any place."""
        placer = make_placer("sequence")
        placed = add_all(placer, [*(numbered(k, k + 1) for k in range(10)), numbered(10, 0)])
        assert ids(placed.entered)[:2] == ["r10", "r0"]
        assert placed.late == ()

    def test_a_missing_number_is_given_up_when_64_higher_ones_have_landed(self):
        """And one that comes after that is late."""
        placer = make_placer("sequence")
        add_all(placer, [numbered(0, 0)])
        higher = [numbered(k, k + 1) for k in range(1, N_HIGHER + 1)]
        assert add_all(placer, higher).entered == ()
        placed = add_all(placer, [numbered(N_HIGHER + 1, N_HIGHER + 2)])
        assert len(placed.entered) == N_HIGHER + 1
        placed = add_all(placer, [numbered(99, 1)])
        assert (placed.entered, ids(placed.late)) == ((), ["r99"])

    def test_a_stated_patience_gives_a_missing_number_up_by_landing_times(self):
        """Not by how many have landed."""
        placer = make_placer("sequence", "10m")
        assert add_all(placer, [numbered(0, 3, landed=0), numbered(1, 4, landed=9)]).entered == ()
        assert ids(add_all(placer, [numbered(2, 5, landed=10)]).entered) == ["r0", "r1", "r2"]

    def test_a_run_without_a_number_has_no_place(self):
        """It is late at once, and no flush lets it in."""
        placer = make_placer("sequence")
        assert ids(add_all(placer, [numbered(0, None)]).late) == ["r0"]
        assert placer.flush().entered == ()

    def test_two_runs_of_one_number_both_enter(self):
        """Ordered by their ids; the second is not late."""
        placer = make_placer("sequence")
        placed = add_all(placer, [numbered(1, 0), numbered(0, 0), numbered(2, 1)])
        assert ids(placed.entered) == ["r0", "r1", "r2"]


class TestByStart:
    def test_nothing_enters_before_twenty_durations_are_known(self):
        """With automatic patience there is nothing yet to judge it by."""
        placer = make_placer("started")
        assert add_all(placer, [stored(k, minute=1000 * k) for k in range(N_DURATIONS_MIN - 1)]).entered == ()
        placed = add_all(placer, [stored(19, minute=19000)])
        assert len(placed.entered) == N_DURATIONS_MIN - 1

    def test_a_run_enters_when_one_landed_that_began_or_ended_later_than_its_start_and_the_patience(self):
        """Event time, whatever the clock says: at the border it waits still."""
        placer = make_placer("started", "30m")
        assert add_all(placer, [stored(0, minute=0), stored(1, minute=25, took=5)]).entered == ()
        assert ids(add_all(placer, [stored(2, minute=20, took=11)]).entered) == ["r0"]

    def test_the_order_is_that_of_the_starts_and_one_that_comes_too_late_is_late(self):
        """Short runs land first, and do not enter first."""
        placer = make_placer("started", "1h")
        placed = add_all(
            placer,
            [stored(0, minute=10), stored(1, minute=0, took=70), stored(2, minute=50), stored(3, minute=130)],
        )
        assert ids(placed.entered) == ["r1", "r0", "r2"]
        placed = add_all(placer, [stored(4, minute=49)])
        assert (ids(placed.late), placed.entered) == (["r4"], ())

    def test_automatic_patience_is_one_and_a_half_times_the_longest_of_the_newest_durations(self):
        """At least a minute; a longest run that is long past does not count."""
        placer = make_placer("started")
        assert placer.patience_s() == PATIENCE_MIN_S
        add_all(placer, [stored(0, minute=0, took=200)])
        assert placer.patience_s() == PATIENCE_FACTOR * 200 * 60
        add_all(placer, [stored(k, minute=k, took=10) for k in range(1, 201)])
        assert placer.patience_s() == PATIENCE_FACTOR * 10 * 60

    def test_old_files_and_wrong_clocks_are_no_durations(self):
        """Negative, or longer than a week from start to landing."""
        placer = make_placer("started")
        add_all(placer, [stored(0, minute=0, took=-5), stored(1, minute=-20000, took=None)])
        assert placer.patience_s() == PATIENCE_MIN_S

    def test_a_run_that_states_no_start_stands_where_it_ended_or_landed(self):
        """The nearest that is known."""
        placer = make_placer("started", "1m")
        ended = stored(0, started=None, finished=START + timedelta(minutes=7))
        landed = stored(1, started=None, finished=None, landed=6)
        placed = add_all(placer, [ended, landed, stored(2, minute=5), stored(3, minute=100, took=1)])
        assert ids(placed.entered) == ["r2", "r1", "r0"]


@pytest.mark.parametrize("by", ["sequence", "started", "arrival"])
def test_a_flush_lets_all_in_that_wait_and_what_comes_before_them_later_is_late(by):
    """In order; nothing waits after it."""
    placer = make_placer(by, "1h")
    for arrival, number in enumerate((5, 3, 9)):
        placer.add(stored(arrival, minute=number, sequence=number))
    expected = ["r0", "r1", "r2"] if by == "arrival" else ["r1", "r0", "r2"]
    assert ids(placer.flush().entered) == expected
    assert placer.n_waiting == 0
    placed = add_all(placer, [stored(3, minute=4, sequence=4)])
    assert ids(placed.late) == ([] if by == "arrival" else ["r3"])


class Ledger:
    """The store's part: places and lateness of runs, as committed."""

    def __init__(self, by, patience):
        self.by, self.patience = by, patience
        self.runs, self.n_placed = [], 0
        self.placer = make_placer(by, patience)

    def land(self, batch):
        """A batch is committed with its arrivals."""
        self.runs += batch
        for run in batch:
            self.placer.add(run)

    def place(self, *, flush=False):
        """Places and lateness are committed."""
        placed = self.placer.flush() if flush else self.placer.ready()
        for run in placed.entered:
            self._set(run, position=self.n_placed)
            self.n_placed += 1
        for run in placed.late:
            self._set(run, late=True)

    def _set(self, run, **fields):
        self.runs[run.arrival] = msgspec.structs.replace(self.runs[run.arrival], **fields)

    def kill(self):
        """Everything but what is committed is lost; as the daemon does, places come before new runs."""
        self.placer = make_placer(self.by, self.patience)
        for run in self.runs:
            self.placer.restore([run])
        self.place()


@settings(max_examples=150, deadline=None)
@given(st.data())
def test_a_placer_that_was_killed_gives_the_places_of_one_that_never_was(data):
    """Killed between any two transactions, also between those of a batch's arrival and of its places."""
    by = data.draw(st.sampled_from(["sequence", "started", "arrival"]))
    patience = data.draw(st.sampled_from(["auto", "20m"]))
    n = data.draw(st.integers(1, 120))
    numbers = data.draw(st.lists(st.one_of(st.none(), st.integers(0, n + 20)), min_size=n, max_size=n))
    minutes = data.draw(st.lists(st.integers(0, 300), min_size=n, max_size=n))
    took = data.draw(st.lists(st.sampled_from([None, 1, 10, 40, -3]), min_size=n, max_size=n))
    runs = [stored(k, minute=minutes[k], took=took[k], sequence=numbers[k]) for k in range(n)]
    never, killed = Ledger(by, patience), Ledger(by, patience)
    start = 0
    while start < n:
        size = data.draw(st.integers(1, 40))
        flush, kill_between, kill_after = (data.draw(st.booleans()) for _ in range(3))
        for ledger in (never, killed):
            ledger.land(runs[start : start + size])
            if ledger is killed and kill_between:
                ledger.kill()
            ledger.place()
            if flush and size > 35:
                ledger.place(flush=True)
            if ledger is killed and kill_after:
                ledger.kill()
        start += size
    assert killed.runs == never.runs
    places = sorted(run.position for run in never.runs if run.position is not None)
    assert places == list(range(len(places)))
    in_order = [
        run for run in sorted(never.runs, key=lambda run: run.position or 0) if run.position is not None
    ]
    if by == "sequence":
        assert [run.run.sequence for run in in_order] == sorted(run.run.sequence for run in in_order)
    if by == "started":
        assert [run.run.started for run in in_order] == sorted(run.run.started for run in in_order)
