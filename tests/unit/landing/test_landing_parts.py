"""The landing's small parts, each alone."""

import os
import time

import pytest

from auditd.landing import Landing
from auditd.landing.folders import is_unchanged, list_folder
from auditd.landing.growing import N_ALWAYS, Growing
from auditd.landing.mounts import Mounts
from auditd.landing.names import Names, is_temporary
from auditd.landing.pace import EVENTS_S, Pace
from auditd.landing.pending import Pending
from auditd.landing.seen import Memory, Seen, from_source, join, split, to_source
from auditd.plan_reading import parse_plan
from auditd.records import Source


@pytest.mark.parametrize("name", [".a.json", "a.json~", "a.json.tmp", "a.part", "a.swp", ".nfs000012"])
def test_temporary_names(name):
    """Every name that design.md lists is passed over."""
    assert is_temporary(name)
    assert not Names(["*"], frozenset()).takes(name, name)


def test_names_by_suffix_and_pattern():
    """Without patterns suffixes decide; with them only they do, on the name or on the path within."""
    free = Names([], frozenset({".json"}))
    assert free.takes("a.JSON", "x/a.JSON")
    assert not free.takes("a.txt", "a.txt")
    patterned = Names(["run-*.out", "deep/*/x.json"], frozenset({".json"}))
    assert patterned.takes("run-1.out", "run-1.out")
    assert patterned.takes("x.json", "deep/1/x.json")
    assert not patterned.takes("x.json", "x.json")
    assert not patterned.takes("run-1.json", "run-1.json")


def test_a_folder_is_trusted_only_when_its_mtime_is_old(tmp_path):
    """A folder changed just before its listing is listed again; an old one after a change or 5 minutes."""
    (tmp_path / "a").write_text("")
    status, now = os.stat(tmp_path), time.time()
    young, new = list_folder(str(tmp_path), status, (), now, local=True)
    assert new == ["a"]
    assert not is_unchanged(status, young, now)
    old, _ = list_folder(str(tmp_path), status, (), now + 100, local=True)
    assert is_unchanged(status, old, now + 130)
    assert not is_unchanged(status, old, now + 500)
    remote, _ = list_folder(str(tmp_path), status, (), now + 100, local=False)
    assert not is_unchanged(status, remote, now + 130)
    os.utime(tmp_path, (1, 1))
    assert not is_unchanged(os.stat(tmp_path), old, now + 130)


def test_listings_grow_rare_when_nothing_lands():
    """Polling doubles its pause up to 30 s, starts over on news, and takes at most 1/400 of a core."""
    pace = Pace()
    pace.polls = True
    assert [pace.interval_s(0.001, changed=False) for _ in range(6)] == [2, 4, 8, 16, 30, 30]
    assert pace.interval_s(0.001, changed=True) == 1
    assert pace.interval_s(0.06, changed=False) >= 0.06 * 400
    assert pace.interval_s(10, changed=False) == pace.LONGEST_S
    pace.polls = False
    assert pace.interval_s(0.001, changed=True) == EVENTS_S


def test_growing_files_are_looked_at_ever_more_seldom():
    """Half a second after a change, then a tenth of its age, at most 30 s; forgotten when there are many."""
    growing = Growing()
    growing.note("a", 1000.0)
    assert growing.due(1000.1) == []
    assert growing.due(1000.6) == ["a"]
    assert growing.due(1000.7) == []
    assert growing.due(1100.0) == ["a"]
    assert growing.next_due() == pytest.approx(1110.0)
    for k in range(N_ALWAYS + 1):
        growing.note(f"b{k}", 1000.0)
    growing.due(3000.0)
    assert growing.next_due() > 3000.0
    assert len(growing.due(4000.0)) <= N_ALWAYS


def test_stillness_survives_a_clock_set_back(tmp_path):
    """A file is still since its status last changed; a clock set back makes it no stiller."""
    path = tmp_path / "a"
    path.write_text("x")
    os.utime(path, (10_000, 10_000))
    pending = Pending(first_seen=10_001, still_since=10_001)
    assert pending.look(path.stat(), 10_001) == 1
    assert pending.look(path.stat(), 10_005) == 5
    assert pending.look(path.stat(), 9_000) <= 0
    os.utime(path, (99_999, 99_999))  # a writer whose clock runs ahead
    assert pending.look(path.stat(), 10_010) == 0
    assert pending.look(path.stat(), 10_015) == 5


def test_errors_back_off():
    """The pause doubles from a second to five minutes."""
    pending, pauses = Pending(first_seen=0, still_since=0), []
    for _ in range(12):
        pending.fail(OSError(5, "Input/output error"), 100.0)
        pauses.append(pending.due - 100.0)
    assert pauses[:4] == [1, 2, 4, 8]
    assert pauses[-1] == 300
    assert "12 attempts" in pending.why


def test_sources_go_to_the_store_and_back():
    """Everything that is remembered of a file survives the store; a foreign context costs a second look."""
    seen = Seen(device=1, inode=2**63, size=3, mtime_ns=4, ctime_ns=5, offset=3, n_records=1, head=b"h",
                tail=b"t", n_head=3, generation=2, first=b"f", context=b"\xff\x00")  # fmt: skip
    assert from_source(to_source("a", seen)) == seen
    foreign = Source(path="a", device=1, inode=2, size=3, mtime_ns=4, offset=3, n_records=1, context=b"{}")
    assert from_source(foreign).ctime_ns == -1


def test_memory_finds_by_path_folder_and_inode():
    """Paths in the plan's own folder, beneath it, beside it and absolute ones are told apart."""
    memory = Memory()
    for inode, path in enumerate(["a", "x/a", "x/y/a", "../a", "/a", "/x/a"]):
        assert join(*split(path)) == path
        memory.put(path, Seen(device=0, inode=inode, size=0, mtime_ns=0))
        assert memory.path_of(inode) == path
        assert memory.get(path).inode == inode
    assert len(memory) == 6
    assert sorted(memory.paths()) == sorted(["a", "x/a", "x/y/a", "../a", "/a", "/x/a"])
    assert list(memory.names("x")) == ["a"]


def test_mounts_of_a_table(tmp_path):
    """The line of proc(5) with optional fields, and an octal space; the longest mount point counts."""
    table = tmp_path / "mountinfo"
    table.write_text(
        "36 35 98:0 /mnt1 / rw,noatime master:1 - ext3 /dev/root rw,errors=continue\n"
        "40 36 0:1 / /scratch\\040space rw - lustre mds@tcp:/x rw\n"
        "41 36 0:2 / /scratch\\040space/local rw shared:3 master:2 - xfs /dev/sdb rw\n"
    )
    mounts = Mounts(str(table))
    assert mounts.kind_of("/anything/at/all") == "ext3"
    assert mounts.kind_of("/scratch space/a") == "lustre"
    assert mounts.kind_of("/scratch space/local/a") == "xfs"
    assert mounts.is_remote("/scratch space/a")
    assert not mounts.is_remote("/scratch space/local")
    assert Mounts(str(tmp_path / "none")).is_remote("/")


def plan_with(tmp_path, landing):
    return parse_plan(f'[landing]\n{landing}\n[responses.y]\nat = "y"\n', tmp_path / "plan.toml")


def test_paths_are_stored_relative_to_the_plan(tmp_path):
    """Within the plan's folder, beside it, one file by name, and the folder itself."""
    home = tmp_path / "home"
    home.mkdir()
    for place in ("in", "../out"):
        (home / place).mkdir()
        (home / place / "a.json").write_text('{"y": 1}')
    (home / "one.ndjson").write_text('{"y": 1}\n')
    landing = Landing(plan_with(home, 'paths = ["in", "../out", "one.ndjson"]'), settle_all=True)
    assert sorted(batch.source.path for batch in landing.scan(time.time())) == [
        "../out/a.json",
        "in/a.json",
        "one.ndjson",
    ]
    whole = Landing(plan_with(home, ""), settle_all=True)
    assert sorted(batch.source.path for batch in whole.scan(time.time())) == ["in/a.json", "one.ndjson"]
    assert whole.progress.n_found == whole.progress.n_done == whole.progress.n_records == 2
    assert whole.progress.n_bytes == 17


def test_hints_outside_the_landing_are_ignored(tmp_path):
    """Only names that a scan would take are taken by a hint."""
    (tmp_path / "in" / ".hidden").mkdir(parents=True)
    landing = Landing(plan_with(tmp_path, 'paths = ["in"]'))
    for path in ("other/a.json", "in/a.txt", "in/.hidden/a.json", "in/a.json~", "inner/a.json"):
        landing.hint(str(tmp_path / path))
    list(landing.scan(time.time()))
    assert landing.wait_s(time.time()) > 1
    landing.hint(str(tmp_path / "in" / "a.json"))
    assert landing.wait_s(time.time()) == 0


def test_files_are_given_in_the_order_of_their_arrival(tmp_path):
    """A backlog comes oldest first, whatever the names are."""
    for k, name in enumerate("dbac"):
        (tmp_path / f"{name}.json").write_text('{"y": 1}')
        os.utime(tmp_path / f"{name}.json", (1000 + k, 1000 + k))
    landing = Landing(plan_with(tmp_path, ""))
    assert [batch.source.path[0] for batch in landing.scan(time.time())] == list("dbac")


def test_a_name_that_no_reader_knows_is_refused(tmp_path):
    """A pattern may match what nobody can read: one refusal that says what to state, and never again."""
    (tmp_path / "a.out").write_text("x")
    plan = plan_with(tmp_path, 'match = ["*.out"]')
    (batch,) = Landing(plan, settle_all=True).scan(time.time())
    assert "landing.format" in batch.items[0].reason
    assert not list(Landing(plan, [batch.source], settle_all=True).scan(time.time()))
    stated = plan_with(tmp_path, 'match = ["*.out"]\nformat = "ndjson"')
    (batch,) = Landing(stated, [batch.source], settle_all=True).scan(time.time())
    assert batch.items[0].kind == "read"
