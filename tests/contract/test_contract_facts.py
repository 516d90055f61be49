"""One suite over every registered fact: a new one is tested the day it is listed."""

import datetime as dt
import random
import time

import msgspec
import pytest

from auditd.checks.facts.book import FactBook
from auditd.checks.facts.registry import FACTS
from auditd.plan_reading import parse_plan
from auditd.records import Refusal, Run

N_RUNS = 900
MAX_US_A_RUN = 150.0  # for all facts together; ten times what is measured on an idle machine
PLAN = parse_plan("""
[record]
id = "id"
sequence = "seq"
started = "start"
finished = "end"
seed = "seed"
parent = "parent"
status = "status"
[responses.lift]
at = "lift"
[responses.drag]
at = "drag"
[factors]
solver = "solver"
mesh = "mesh"
[nuisance]
host = "host"
[machines]
exclusive = ["host"]
""")


def _faulty_campaign():
    """Runs with something for every fact to find."""
    rng = random.Random(31)
    start = dt.datetime(2026, 4, 1, tzinfo=dt.UTC)
    items = []
    for i in range(N_RUNS):
        cell = {"solver": "b" if i > 450 else "a", "mesh": rng.choice(["x", "y", 1, True])}
        begun = start + dt.timedelta(seconds=30.0 * i - 900 * (i == 300))
        lift = min(rng.gauss(0, 1), 1.1)
        fixed = cell == {"solver": "a", "mesh": "y"}
        run = Run(
            id=f"r{i:04d}",
            path="runs.ndjson",
            offset=i,
            number=i,
            sequence=i + (i > 500),
            started=begun,
            finished=begun + dt.timedelta(seconds=rng.uniform(20, 35)),
            seed=str(i % 700),
            parent=f"r{i - 1:04d}" if i % 12 == 5 else None,
            completed=not (600 <= i < 640 and rng.random() < 0.6),
            cell=cell,
            nuisance={"host": "n1" if cell["mesh"] == "x" else f"n{2 + i % 2}"},
            responses={
                "lift": 0.123456789 if fixed else lift,
                "drag": 9.87654321 if fixed else rng.gauss(5, 2),
            },
            metadata={},
            digest=i.to_bytes(4, "big"),
        )
        items.append(run)
        if i == 700:
            items.append(
                Refusal(path="runs.ndjson", offset=1, number=1, reason="changed", kind="rewrite", id="r0001")
            )
    return items


ITEMS = _faulty_campaign()


def _told(fact, items, block):
    """Tell a fact of everything; return the transitions in order, and the last finding of each key."""
    begun, last = [], {}

    def take(findings):
        for finding in findings:
            if last.get(finding.key) is None or last[finding.key].holds != finding.holds:
                begun.append((finding.key, finding.run, finding.index, finding.holds))
            last[finding.key] = finding

    arrival = position = 0
    for n, item in enumerate(items):
        if isinstance(item, Refusal):
            take(fact.refused(item))
        else:
            take(fact.arrived(item, arrival))
            arrival += 1
            if item.number % 97:  # the others are late
                take(fact.placed(item, position))
                position += 1
        if n % block == block - 1:
            take(fact.standing())
    take(fact.standing())
    return begun, last


@pytest.mark.parametrize("make", FACTS, ids=lambda make: make.kind)
class TestEveryFact:
    def test_finds_its_planted_fault_and_says_so_in_its_kind(self, make):
        """The campaign has a fault for every fact; each finding has the fact's kind, a key and a sentence."""
        _, last = _told(make(PLAN, alarm_budget=0.005), ITEMS, 50)
        assert last
        for finding in last.values():
            assert finding.kind == make.kind
            assert finding.key.startswith(f"{make.kind}:")
            assert len(finding.message) > 20
            assert "\n" not in finding.message

    def test_finds_the_same_however_runs_come_in_blocks(self, make):
        """The same conditions begin at the same runs, and end in the same findings, for any block size."""
        outcomes = [_told(make(PLAN, alarm_budget=0.005), ITEMS, block) for block in (1, 7, 10**9)]
        for begun, last in outcomes[1:]:
            assert begun == outcomes[0][0]
            assert last == outcomes[0][1]

    def test_changes_no_run(self, make):
        """A fact reads runs, and leaves their cells, responses and metadata as they are."""
        before = [msgspec.json.encode(item) for item in ITEMS]
        _told(make(PLAN, alarm_budget=0.005), ITEMS, 50)
        assert [msgspec.json.encode(item) for item in ITEMS] == before

    def test_has_nothing_new_to_say_when_asked_twice(self, make):
        """`standing` tells of a change once."""
        fact = make(PLAN, alarm_budget=0.005)
        _told(fact, ITEMS, 50)
        assert not list(fact.standing())

    def test_says_nothing_before_the_first_run(self, make):
        """An empty campaign has no findings."""
        assert not list(make(PLAN, alarm_budget=0.005).standing())

    def test_keeps_no_whole_run(self, make):
        """No attribute, however deep, holds a Run: memory stays small at a million runs."""
        fact = make(PLAN, alarm_budget=0.005)
        _told(fact, ITEMS, 50)
        seen, todo = set(), [fact]
        while todo:
            one = todo.pop()
            if id(one) in seen or one is PLAN:
                continue
            seen.add(id(one))
            assert not isinstance(one, Run)
            if isinstance(one, dict):
                todo += [*one.keys(), *one.values()]
            elif isinstance(one, (list, tuple, set)):
                todo += one
            elif type(one).__module__.startswith("auditd."):
                slots = [name for kind in type(one).__mro__ for name in getattr(kind, "__slots__", ())]
                todo += [
                    *getattr(one, "__dict__", {}).values(),
                    *(getattr(one, n) for n in slots if hasattr(one, n)),
                ]


def test_the_book_finds_what_its_facts_find():
    """Together they find the union of what each finds alone."""
    alone = {}
    for make in FACTS:
        alone |= _told(make(PLAN, alarm_budget=0.005), ITEMS, 50)[1]
    assert _told(FactBook(PLAN, alarm_budget=0.005), ITEMS, 50)[1] == alone


def test_the_book_stays_far_below_the_cost_of_reading_a_run():
    """Processor time a run for all facts, with a bound that only a fault of another order exceeds."""
    book = FactBook(PLAN, alarm_budget=0.005)
    runs = [item for item in ITEMS if isinstance(item, Run)]
    began_s = time.process_time()
    for n, run in enumerate(runs):
        book.arrived(run, n)
        book.placed(run, n)
    assert (time.process_time() - began_s) / len(runs) * 1e6 < MAX_US_A_RUN
