"""What befalls files, on real files, processes and threads; errors injected only where root meets none."""

import errno
import json
import os
import pathlib
import random
import shutil
import signal
import subprocess
import sys
import threading
import time

import pytest

from auditd.landing import Landing, Watcher
from auditd.landing.mounts import Mounts
from auditd.plan_reading import parse_plan
from auditd.records import Refusal, Run

PLAN = '[landing]\npaths = ["results"]\nsettle = "0.2s"\n[record]\nid = "id"\n[responses.y]\nat = "y"\n'


@pytest.fixture
def results(tmp_path):
    folder = tmp_path / "results"
    folder.mkdir()
    return folder


@pytest.fixture
def plan(tmp_path, results):
    return parse_plan(PLAN, tmp_path / "plan.toml")


class Kept:
    """A stand-in for the store: what it was given, and the last source of every path."""

    def __init__(self):
        self.items, self.sources, self.changes = [], {}, []

    def take(self, batches):
        for batch in batches:
            self.items += batch.items
            self.sources[batch.source.path] = batch.source
            self.changes.append((batch.source.path, batch.change, len(batch.items)))
        return self

    @property
    def ids(self):
        return [item.id for item in self.items if isinstance(item, Run)]

    @property
    def refusals(self):
        return [item for item in self.items if isinstance(item, Refusal)]


def record(key, y=1.0):
    return json.dumps({"id": key, "y": y})


def now_after(seconds=10.0):
    """A moment by which everything that was written is settled."""
    return time.time() + seconds


def run_daemon_until(landing, watcher, kept, done, limit_s):
    """The daemon's loop until a condition holds; returns the seconds it took."""
    began = time.monotonic()
    while not done() and time.monotonic() - began < limit_s:
        watcher.relay()
        kept.take(landing.visit(time.time()))
        watcher.tend(time.time())
        watcher.wake.wait(min(0.2, landing.wait_s(time.time())))
    return time.monotonic() - began


def watching(plan):
    """A landing with events, begun, and what it gave."""
    landing, kept = Landing(plan), Kept()
    watcher = Watcher(landing, "events")
    watcher.start()
    kept.take(landing.visit(time.time()))
    yield landing, watcher, kept
    watcher.stop()


@pytest.fixture
def watched(plan):
    yield from watching(plan)


@pytest.fixture
def patient(tmp_path, results):
    """Likewise, but files settle in five minutes only: what is taken before was told by an event."""
    yield from watching(parse_plan(PLAN.replace("0.2s", "5m"), tmp_path / "plan.toml"))


def test_events_wake_and_a_renamed_file_is_taken_at_once(patient, results):
    """A file renamed into place is indexed at once, without waiting to settle."""
    landing, watcher, kept = patient
    assert watcher.mode == "events"
    (results / ".r1.tmp").write_text(record("r1"))
    os.rename(results / ".r1.tmp", results / "r1.json")
    took_s = run_daemon_until(landing, watcher, kept, lambda: kept.ids, 20)
    assert kept.ids == ["r1"]
    assert took_s < 20


@pytest.mark.slow
def test_overflow_of_30000_files(watched, results):
    """Stopped while 30,000 files land, the queue overflows; all are indexed within 60 s, each once."""
    landing, watcher, kept = watched
    reader = next(iter(watcher._observer.emitters))._inotify_fd
    with reader._lock:  # the thread that reads the kernel's queue is held, as a stopped process would be
        for k in range(30_000):
            with open(results / f"r{k}.json", "w", encoding="utf-8") as file:
                file.write(record(f"r{k}"))
    took_s = run_daemon_until(landing, watcher, kept, lambda: len(kept.ids) >= 30_000, 60)
    assert len(kept.ids) == len(set(kept.ids)) == 30_000, took_s
    assert watcher.n_overflows >= 1


def test_without_events_polling_finds_all(plan, results):
    """Where the plan says poll, files are found by listings alone, and the reason is told."""
    landing, kept = Landing(plan), Kept()
    watcher = Watcher(landing, "poll")
    watcher.start()
    (results / "r.json").write_text(record("r"))
    run_daemon_until(landing, watcher, kept, lambda: kept.ids, 5)
    assert kept.ids == ["r"]
    assert (watcher.mode, watcher.reason) == ("poll", "the plan says so")


@pytest.mark.parametrize("kind", ["nfs4", "fuse.sshfs", "cifs", "lustre", "9p"])
def test_network_filesystems_are_polled(plan, results, tmp_path, kind):
    """From a mountinfo table (layout: proc(5)) with the landing on a network filesystem: polling, and why."""
    table = tmp_path / "mountinfo"
    escaped = str(results).replace(" ", "\\040")
    table.write_text(
        "22 1 8:1 / / rw,relatime shared:1 - ext4 /dev/sda1 rw\n"
        f"36 22 0:41 / {escaped} rw shared:5 - {kind} server:/x rw\n"
    )
    landing = Landing(plan)
    landing.area.mounts = Mounts(str(table))
    watcher = Watcher(landing, "auto")
    watcher.start()
    assert watcher.mode == "poll"
    assert kind in watcher.reason
    overridden = Watcher(landing, "events")
    overridden.start()
    assert overridden.mode == "events"
    overridden.stop()


def test_events_that_never_come_are_noticed(plan, results, monkeypatch):
    """If files land and no event at all is told, the watcher falls back to polling and says so."""
    landing, kept = Landing(plan), Kept()
    watcher = Watcher(landing, "auto")
    monkeypatch.setattr(watcher._gathered, "dispatch", lambda event: None)
    watcher.start()
    kept.take(landing.scan(time.time()))
    watcher.tend(time.time())
    for k in range(4):
        (results / f"r{k}.json").write_text(record(f"r{k}"))
    kept.take(landing.scan(time.time() + 30))
    watcher.tend(time.time() + 30)
    assert watcher.mode == "poll"
    assert "no event came" in watcher.reason
    assert len(kept.ids) == 4


@pytest.mark.parametrize("number", [errno.ENOSPC, errno.EMFILE])
def test_no_watches_or_descriptors_left(plan, monkeypatch, number):
    """ENOSPC or EMFILE at the start of watching (injected): polling, with the system's words as reason."""

    def refuse(*args, **options):
        raise OSError(number, os.strerror(number))

    monkeypatch.setattr("watchdog.observers.inotify.InotifyWatchGroup.__init__", refuse)
    watcher = Watcher(Landing(plan), "auto")
    watcher.start()
    assert watcher.mode == "poll"
    assert os.strerror(number) in watcher.reason
    watcher.stop()


def test_more_folders_than_watches(plan, results, monkeypatch):
    """With more folders than the limit allows the landing is polled, and the limit is named."""
    monkeypatch.setattr("auditd.landing.watcher.watch_limit", lambda: 10)
    for k in range(12):
        (results / f"d{k}").mkdir()
    landing = Landing(plan)
    watcher = Watcher(landing, "auto")
    watcher.start()
    list(landing.scan(time.time()))
    watcher.tend(time.time())
    assert watcher.mode == "poll"
    assert "max_user_watches is 10" in watcher.reason


@pytest.mark.filterwarnings("ignore::pytest.PytestUnhandledThreadExceptionWarning")
def test_a_dead_observer_is_replaced(patient, results):
    """An observer whose thread died is noticed by the next tending and replaced; files are seen again."""
    landing, watcher, kept = patient
    dead = watcher._observer
    dead.stop()
    dead.join()
    assert watcher.tend(time.time() + 60)
    assert watcher._observer is not dead
    assert watcher.n_restarts == 1
    (results / "r.json").write_text(record("r"))
    assert run_daemon_until(landing, watcher, kept, lambda: kept.ids, 20) < 20


def test_a_dead_emitter_is_replaced(patient, results):
    """Likewise a single emitter's thread beneath a living observer."""
    landing, watcher, kept = patient
    emitter = next(iter(watcher._observer.emitters))
    emitter.stop()
    emitter.join()
    assert watcher.tend(time.time() + 60)
    (results / "r.json").write_text(record("r"))
    assert run_daemon_until(landing, watcher, kept, lambda: kept.ids, 20) < 20


def test_watching_that_cannot_be_restored_says_so(watched, monkeypatch):
    """If the observer cannot be replaced at all, tend() is False: the daemon ends with 70."""
    _, watcher, _ = watched
    watcher._observer.stop()
    watcher._observer.join()
    monkeypatch.setattr("auditd.landing.watcher.Observer", lambda: 1 / 0)
    assert watcher.tend(time.time() + 60) is False


DRIPPER = """
import sys, time
path, text, pause = sys.argv[1], sys.argv[2], float(sys.argv[3])
with open(path, "w") as file:
    for piece in range(0, len(text), 7):
        file.write(text[piece:piece + 7]); file.flush(); time.sleep(pause)
"""


def test_dripped_files_and_a_killed_writer(plan, results):
    """Pieces with pauses, and a writer killed half-way: no partial run, one final one, a stuck one waits."""
    landing, kept = Landing(plan), Kept()
    text = json.dumps({"id": "whole", "y": 1, "note": "x" * 60})
    arguments = [sys.executable, "-c", DRIPPER]
    slow = subprocess.Popen([*arguments, results / "slow.json", text, "0.05"])
    killed = subprocess.Popen([*arguments, results / "killed.json", text.replace("whole", "dead"), "0.3"])
    began = time.monotonic()
    while slow.poll() is None or time.monotonic() - began < 2.5:
        kept.take(landing.scan(time.time()))
        if time.monotonic() - began > 1 and killed.poll() is None:
            killed.send_signal(signal.SIGKILL)
            killed.wait()
        time.sleep(0.05)
    kept.take(landing.scan(now_after()))
    assert kept.ids == ["whole"]
    assert not kept.refusals
    (stuck,) = landing.waiting(now_after(100))
    assert stuck.path == "results/killed.json"
    assert stuck.age_s > 90
    assert "ends too early" in stuck.why


def test_gather_takes_what_validates_and_lists_the_rest(plan, results):
    """settle_all takes a file written just now, a last line without newline too, but never half a JSON."""
    (results / "a.json").write_text(record("a"))
    (results / "half.json").write_text(record("half")[:-1])
    (results / "l.ndjson").write_text(record("l0") + "\n" + record("l1"))
    (results / "m.ndjson").write_text(record("m0") + "\n" + record("m1")[:-3])
    landing, kept = Landing(plan, settle_all=True), Kept()
    kept.take(landing.scan(time.time()))
    assert sorted(kept.ids) == ["a", "l0", "l1", "m0"]
    assert sorted(one.path for one in landing.waiting(time.time())) == [
        "results/half.json",
        "results/m.ndjson",
    ]


def test_a_last_line_is_taken_after_it_was_still(plan, results):
    """A last line without newline waits for 60 s, then is taken if it validates; a late newline is none."""
    path = results / "l.ndjson"
    path.write_text(record("a") + "\n" + record("b"))
    landing, kept, now = Landing(plan), Kept(), time.time()
    kept.take(landing.visit(now + 1)).take(landing.visit(now + 30))
    assert kept.ids == ["a"]
    assert [one.path for one in landing.waiting(now + 30)] == ["results/l.ndjson"]
    kept.take(landing.visit(now + 62))
    assert kept.ids == ["a", "b"]
    with open(path, "a", encoding="utf-8") as file:
        file.write("\n" + record("c") + "\n")
    kept.take(landing.visit(now + 70))
    assert kept.ids == ["a", "b", "c"]
    assert not kept.refusals


def copy_by_temporary_name(source, target):
    """What rsync does: a hidden name with a random end, then a rename that keeps the old times."""
    hidden = target.with_name(f".{target.name}.Xy12aB")
    shutil.copy2(source, hidden)
    os.rename(hidden, target)


def save_like_an_editor(source, target):
    """Write a swap file and a backup beside the file, then rename over it."""
    target.with_name(f".{target.name}.swp").write_bytes(b"b0VIM")
    new = target.with_name(f"{target.name}~")
    shutil.copyfile(source, new)
    os.rename(new, target)


@pytest.mark.parametrize(
    "bring",
    [copy_by_temporary_name, save_like_an_editor, shutil.copy2, shutil.copyfile, shutil.move, os.link],
    ids=["rsync", "editor", "cp -p", "cp", "mv", "ln"],
)
def test_however_a_file_is_brought_it_is_one_run(plan, results, tmp_path, bring):
    """rsync, editors, cp, `cp -p` of an old file, mv from outside: exactly one run each."""
    outside = tmp_path / "outside.json"
    outside.write_text(record("r"))
    os.utime(outside, (1e9, 1e9))
    landing, kept = Landing(plan), Kept()
    kept.take(landing.scan(time.time()))
    bring(outside, results / "r.json")
    for _ in range(3):
        kept.take(landing.scan(now_after()))
    assert kept.ids == ["r"]


@pytest.mark.parametrize("name", ["r.json", "r.ndjson"])
@pytest.mark.parametrize("restart", [False, True])
def test_a_file_moved_within_the_landing_is_not_taken_again(tmp_path, results, name, restart):
    """Renamed within, or with its folder, a file's runs are not taken twice, even without a stated id."""
    plan = parse_plan(PLAN.replace('id = "id"', ""), tmp_path / "plan.toml")
    (results / "old").mkdir()
    (results / "old" / name).write_text(record("r") + "\n")
    landing, kept = Landing(plan), Kept()
    kept.take(landing.scan(now_after()))
    os.rename(results / "old" / name, results / name)
    os.rename(results / "old", results / "empty")
    landing = Landing(plan, kept.sources.values()) if restart else landing
    kept.take(landing.scan(now_after(20))).take(landing.scan(now_after(40)))
    assert kept.ids == [f"results/old/{name}#0"]
    assert f"results/{name}" in kept.sources


@pytest.mark.parametrize("restart", [False, True])
@pytest.mark.parametrize("name", ["r.json", "r.ndjson"])
def test_same_size_and_mtime_but_other_content(plan, results, name, restart):
    """A rewrite that keeps size and mtime is noticed within 10 minutes, also over a restart."""
    path = results / name
    path.write_text(record("r", 1.0) + "\n")
    landing, kept = Landing(plan), Kept()
    now = now_after()
    kept.take(landing.scan(now))
    status = path.stat()
    path.write_text(record("r", 2.0) + "\n")
    os.utime(path, ns=(status.st_atime_ns, status.st_mtime_ns))
    assert path.stat().st_size == status.st_size
    landing = Landing(plan, kept.sources.values()) if restart else landing
    for minute in range(12):
        kept.take(landing.visit(now + 60 * minute))
    assert [item.responses["y"] for item in kept.items] == [1.0, 2.0]
    assert kept.changes[-1] == (f"results/{name}", "rewritten", 1)


def test_a_touched_file_gives_no_record_again(plan, results):
    """touch and chmod change a status, not a run."""
    for name in ("a.json", "b.ndjson"):
        (results / name).write_text(record(name) + "\n")
    landing, kept = Landing(plan), Kept()
    kept.take(landing.scan(now_after()))
    for name in ("a.json", "b.ndjson"):
        os.utime(results / name, (2e9, 2e9))
        os.chmod(results / name, 0o600)
    for minute in range(12):
        kept.take(landing.visit(now_after(60 * minute)))
    assert sorted(kept.ids) == ["a.json", "b.ndjson"]


class Writer:
    """Does to a file of lines whatever befalls them, and knows what stood there when it was scanned."""

    def __init__(self, rng, path):
        self.rng, self.path, self.n, self.settled = rng, path, 0, set()
        path.write_bytes(b"")

    def lines(self):
        self.n += 1
        return b"".join(
            record(f"r{self.n}-{k}", self.rng.random()).encode() + b"\n"
            for k in range(self.rng.randrange(1, 30))
        )

    def append(self):
        with open(self.path, "ab") as file:
            file.write(self.lines()[: self.rng.choice([None, -5])])

    def truncate(self):
        os.truncate(self.path, self.rng.randrange(self.path.stat().st_size + 1))

    def start_over(self):
        os.truncate(self.path, 0)
        self.append()

    def rotate(self):
        os.rename(self.path, self.path.with_name("old.log.1"))
        self.path.write_bytes(self.lines())

    def replace(self):
        new = self.path.with_name(".new")
        new.write_bytes(self.rng.choice([b"", self.path.read_bytes()]) + self.lines())
        os.rename(new, self.path)

    def rewrite(self):
        content = self.path.read_bytes().replace(b'"y": 0.1', b'"y": 0.2')
        with open(self.path, "r+b") as file:
            file.write(content)

    def note(self):
        whole = self.path.read_bytes().split(b"\n")[:-1]
        self.settled |= {line for line in whole if line and is_record(line)}


def is_record(line):
    try:
        return isinstance(json.loads(line), dict)
    except ValueError:
        return False


@pytest.mark.parametrize("seed", range(40))
def test_appended_truncated_rotated_replaced_at_random(plan, results, seed):
    """Over 40 random steps with restarts, what was taken is what stood in whole lines at some scan."""
    rng = random.Random(seed)
    writer = Writer(rng, results / "x.ndjson")
    landing, kept, now = Landing(plan), Kept(), time.time()
    acts = [writer.append] * 4 + [
        writer.truncate,
        writer.start_over,
        writer.rotate,
        writer.replace,
        writer.rewrite,
    ]
    for _ in range(40):
        rng.choice(acts)()
        writer.note()
        if rng.random() < 0.2:
            landing = Landing(plan, kept.sources.values())
        now += 1
        kept.take(landing.scan(now))
    got = {(item.id, item.responses["y"]) for item in kept.items if isinstance(item, Run)}
    expected = {(one["id"], one["y"]) for one in map(json.loads, writer.settled)}
    assert got == expected


def test_killed_between_batches_goes_on_exactly_once(plan, results, monkeypatch):
    """Broken off after any number of batches, the next landing gives exactly the records that are missing."""
    for module in ("auditd.read.ndjson", "auditd.read.json_document"):
        monkeypatch.setattr(f"{module}.MAX_PORTION_RECORDS", 7)
    (results / "a.ndjson").write_text("".join(record(f"a{k}") + "\n" for k in range(50)))
    (results / "b.json").write_text(json.dumps([json.loads(record(f"b{k}")) for k in range(50)]))
    wanted = sorted([f"a{k}" for k in range(50)] + [f"b{k}" for k in range(50)])
    rng, kept = random.Random(5), Kept()
    for _ in range(60):
        landing = Landing(plan, kept.sources.values())
        for n, batch in enumerate(landing.scan(now_after())):
            if n == rng.randrange(4):
                break  # given, but never committed
            kept.take([batch])
    assert sorted(kept.ids) == wanted


def test_a_store_that_fails_gets_the_batch_again(plan, results):
    """If the iteration is broken off, the same landing gives the uncommitted batch at its next scan."""
    (results / "a.json").write_text(record("a"))
    landing, kept = Landing(plan), Kept()
    for _ in landing.scan(now_after()):
        break
    kept.take(landing.scan(now_after(20)))
    assert kept.ids == ["a"]


@pytest.mark.slow
def test_folders_moved_in_a_thousand_times(watched, results, tmp_path):
    """A folder that is moved in, or made and filled at once, 1,000 times: nothing missed, nothing twice."""
    landing, watcher, kept = watched
    errors = []

    def bring():
        try:
            for k in range(1000):
                inside = k % 2 == 0
                folder = (results if inside else tmp_path) / f"d{k}" / "deep"
                folder.mkdir(parents=True)
                (folder / "r.json").write_text(record(f"r{k}"))
                if not inside:
                    os.rename(folder.parent, results / f"d{k}")
        except OSError as error:
            errors.append(error)

    writer = threading.Thread(target=bring)
    writer.start()
    run_daemon_until(landing, watcher, kept, lambda: len(kept.ids) >= 1000, 70)
    writer.join()
    kept.take(landing.scan(now_after()))
    assert not errors
    assert len(kept.ids) == len(set(kept.ids)) == 1000


def test_the_landing_removed_and_made_again(patient, results):
    """Removed and made again with old and new files: goes on, takes nothing again and nothing as deleted."""
    landing, watcher, kept = patient
    (results / "a.json").write_text(record("a"))
    run_daemon_until(landing, watcher, kept, lambda: kept.ids, 20)
    shutil.rmtree(results)
    kept.take(landing.scan(time.time()))
    assert [one.path for one in landing.waiting(time.time())] == ["results"]
    watcher.tend(time.time() + 20)
    results.mkdir()
    (results / "a.json").write_text(record("a"))
    (results / "b.json").write_text(record("b"))
    for rescan in (1, 2):
        kept.take(landing.scan(now_after(600 * rescan)))
    assert kept.ids == ["a", "b"]
    assert not landing.waiting(time.time())
    watcher.tend(time.time() + 100)
    (results / "c.json").write_text(record("c"))
    assert run_daemon_until(landing, watcher, kept, lambda: len(kept.ids) == 3, 20) < 20


def test_inodes_that_change_by_a_remount(plan, results):
    """With other device and inode numbers but the same files (a remount), nothing is taken again."""
    import msgspec

    (results / "a.json").write_text(record("a"))
    (results / "b.ndjson").write_text(record("b") + "\n")
    kept = Kept().take(Landing(plan).scan(now_after()))
    stored = [
        msgspec.structs.replace(one, device=one.device + 1, inode=one.inode + 7)
        for one in kept.sources.values()
    ]
    kept.take(Landing(plan, stored).scan(now_after()))
    assert sorted(kept.ids) == ["a", "b"]


@pytest.mark.parametrize("number", [errno.EACCES, errno.EIO, errno.ESTALE, errno.EMFILE])
def test_one_unreadable_path_never_stops_the_others(plan, results, monkeypatch, number):
    """An error on one path (injected: root is refused nothing) backs off, is listed, and heals."""
    for key in ("bad", "good"):
        (results / f"{key}.json").write_text(record(key))
    real_open, attempts = os.open, []

    def refusing(path, *args, **options):
        if str(path).endswith("bad.json"):
            attempts.append(path)
            raise OSError(number, os.strerror(number))
        return real_open(path, *args, **options)

    monkeypatch.setattr("auditd.landing.taking.os.open", refusing)
    landing, kept, now = Landing(plan), Kept(), now_after()
    for second in range(100):
        kept.take(landing.visit(now + second))
    assert kept.ids == ["good"]
    assert 4 < len(attempts) < 12, "each attempt waits twice as long as the one before"
    (stuck,) = landing.waiting(now + 100)
    assert os.strerror(number) in stuck.why
    monkeypatch.undo()
    kept.take(landing.visit(now + 500))
    assert kept.ids == ["good", "bad"]
    assert not landing.waiting(now + 500)


def test_one_folder_that_cannot_be_listed(plan, results, monkeypatch):
    """A folder that answers EIO (injected) is listed as waiting; files elsewhere go on."""
    (results / "sick").mkdir()
    (results / "sick" / "a.json").write_text(record("a"))
    (results / "b.json").write_text(record("b"))
    real_scandir = os.scandir

    def refusing(path):
        if str(path).endswith("sick"):
            raise OSError(errno.EIO, os.strerror(errno.EIO))
        return real_scandir(path)

    monkeypatch.setattr("auditd.landing.folders.os.scandir", refusing)
    landing, kept = Landing(plan), Kept()
    kept.take(landing.scan(now_after()))
    assert kept.ids == ["b"]
    assert [one.path for one in landing.waiting(now_after())] == ["results/sick"]
    monkeypatch.undo()
    kept.take(landing.scan(now_after(600)))
    assert kept.ids == ["b", "a"]
    assert not landing.waiting(now_after())


def test_a_file_that_vanishes_while_it_is_looked_at(plan, results, monkeypatch):
    """Gone between listing and opening: no run, no refusal, nothing waiting."""
    (results / "a.json").write_text(record("a"))
    real_open = os.open

    def vanish(path, *args, **options):
        os.unlink(path)
        return real_open(path, *args, **options)

    monkeypatch.setattr("auditd.landing.taking.os.open", vanish)
    landing = Landing(plan)
    assert not list(landing.scan(now_after()))
    assert not landing.waiting(now_after())


def test_links_pipes_and_temporary_names_are_passed_over(plan, results, tmp_path):
    """Links are not followed (nor loops of them), a pipe never hangs the scan, temporary names are none."""
    (tmp_path / "outside.json").write_text(record("outside"))
    os.symlink(tmp_path / "outside.json", results / "link.json")
    os.symlink(results, results / "loop")
    os.mkfifo(results / "pipe.json")
    for name in (".r.json", "r.json~", "r.json.tmp", "r.json.part", "r.json.swp", ".nfs0001"):
        (results / name).write_text(record(name))
    landing, kept = Landing(plan), Kept()
    landing.hint(str(results / "link.json"))
    landing.hint(str(results / "pipe.json"))
    kept.take(landing.visit(now_after())).take(landing.visit(now_after(100)))
    assert not kept.items
    assert not landing.waiting(now_after(100))


HOSTILE = {
    "not-utf8.json": b'{"id": "\xff", "y": 1}',
    "nul.json": b'{"id": "a\0b", "y": 1}',
    "escaped-nul.json": b'{"id": "a\\u0000b", "y": 1}',
    "deep.json": b"[" * 10_000 + b"]" * 10_000,
    "deep-record.json": b'{"id": "d", "y": 1, "z": ' + b"[" * 64 + b"]" * 64 + b"}",
    "huge-number.json": b'{"id": "h", "y": 1e400}',
    "lone-surrogate.json": b'{"id": "\\ud800", "y": 1}',
    "big-record.json": b'{"id": "b", "y": 1, "z": "' + b"x" * 2**24 + b'"}',
    "lines.ndjson": b'\xff\n{"id": "n", "y": "1"}\n[1]\n' + b"[" * 10_000 + b"\n",
    "table.csv": b'id,y\n"a"b,1\nc\n\xff,1\nd,1e400\n',
    "twice.csv": b"id,y,y\n1,2,3\n",
    "utf16.csv": "id,y\n1,2\n".encode("utf-16"),
}
N_REFUSALS = {"lines.ndjson": 4, "table.csv": 4}


@pytest.mark.parametrize("name", HOSTILE)
def test_hostile_bytes_are_refused(plan, results, name):
    """Each gives refusals with a reason that can be stored and shown, and no run."""
    (results / name).write_bytes(HOSTILE[name])
    landing, kept = Landing(plan), Kept()
    kept.take(landing.scan(now_after()))
    assert not kept.ids
    assert len(kept.refusals) == N_REFUSALS.get(name, 1)
    for refusal in kept.refusals:
        assert refusal.reason.encode()
        assert len(refusal.reason) <= 500


def test_a_bom_and_a_proto_key_are_read(plan, results):
    """A byte order mark is passed over, and `__proto__` is a name like any other."""
    (results / "a.json").write_bytes(b'\xef\xbb\xbf{"id": "a", "y": 1, "__proto__": {"x": 1}}')
    kept = Kept().take(Landing(plan).scan(now_after()))
    assert kept.ids == ["a"]
    assert kept.items[0].metadata == {"__proto__": {"x": 1}}


def test_a_line_of_100_mb_is_stepped_over_in_bounded_memory(plan, results):
    """A line of 100 MB is one refusal, its neighbours are runs, and less than 64 MB are held meanwhile."""
    import tracemalloc

    with open(results / "x.ndjson", "wb") as file:
        file.write(record("before").encode() + b'\n{"id": "big", "y": 1, "z": "')
        file.writelines(b"x" * 1_000_000 for _ in range(100))
        file.write(b'"}\n' + record("after").encode() + b"\n")
    tracemalloc.start()
    try:
        kept = Kept().take(Landing(plan).scan(now_after()))
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    assert kept.ids == ["before", "after"]
    assert [(one.offset, one.kind) for one in kept.refusals] == [(len(record("before")) + 1, "read")]
    assert peak < 64e6


def test_names_with_newlines_escapes_and_broken_bytes(plan, results):
    """Newlines and terminal escapes stay data; bytes that are not UTF-8 are escaped; each file once."""
    names = [b"new\nline.json", b"esc\x1b[31mred.json", b"\xff\xfe.json", "ä\u202e.json".encode()]
    for k, name in enumerate(names):
        with open(os.path.join(os.fsencode(results), name), "w", encoding="utf-8") as file:
            file.write(record(f"r{k}"))
    landing, kept = Landing(plan), Kept()
    for later in (10, 400, 1000):
        kept.take(landing.scan(now_after(later)))
    kept.take(Landing(plan, kept.sources.values()).scan(now_after()))
    assert sorted(kept.ids) == ["r0", "r1", "r2", "r3"]
    assert "results/\\xff\\xfe.json" in kept.sources
    for path in kept.sources:
        path.encode()


def test_a_refused_file_is_read_again_when_it_changes(plan, results):
    """Garbage is one refusal of the file, told once; mended, its run is taken."""
    path = results / "a.json"
    path.write_text("not JSON at all")
    landing, kept = Landing(plan), Kept()
    for later in (10, 60, 700):
        kept.take(landing.visit(now_after(later)))
    assert [one.kind for one in kept.refusals] == ["file"]
    assert kept.sources["results/a.json"].state == "refused"
    path.write_text(record("a"))
    for later in range(800, 1600, 100):
        kept.take(landing.visit(now_after(later)))
    assert kept.ids == ["a"]
    assert kept.sources["results/a.json"].state == "taken"


def test_memory_stays_bounded_on_a_large_file(plan, results):
    """A file of 60,000 records is given in batches of at most 20,000: the store commits between."""
    with open(results / "x.ndjson", "w", encoding="utf-8") as file:
        file.writelines(f"{record(f'r{k}')}\n" for k in range(60_000))
    sizes = [len(batch.items) for batch in Landing(plan).scan(now_after())]
    assert sum(sizes) == 60_000
    assert max(sizes) <= 20_000


def test_rotated_logs_without_ids_are_new_runs(tmp_path, results):
    """Without a stated id, a log that starts over under its name gives new runs with ids of their own."""
    plan = parse_plan(PLAN.replace('id = "id"', ""), tmp_path / "plan.toml")
    path = pathlib.Path(results) / "x.ndjson"
    path.write_text(record("a") + "\n")
    landing, kept, now = Landing(plan), Kept(), time.time()
    kept.take(landing.scan(now))
    os.rename(path, results / "x.ndjson.1")
    path.write_text(record("b") + "\n")
    kept.take(landing.scan(now + 1))
    os.truncate(path, 0)
    kept.take(landing.scan(now + 2))
    path.write_text(record("c") + "\n")
    kept.take(Landing(plan, kept.sources.values()).scan(now + 3))
    assert kept.ids == ["results/x.ndjson#0", "results/x.ndjson~1#0", "results/x.ndjson~2#0"]
    assert [change for _, change, n in kept.changes if n] == ["new", "rotated", "truncated"]


def test_a_line_that_was_taken_and_is_written_on(tmp_path, results):
    """A last line taken after a minute's rest that then goes on is given once more, whole."""
    plan = parse_plan(PLAN, tmp_path / "plan.toml")
    path = results / "x.csv"
    path.write_text("id,y\na,1\nb,2")
    landing, kept, now = Landing(plan), Kept(), time.time()
    kept.take(landing.scan(now + 100))
    with open(path, "a", encoding="utf-8") as file:
        file.write("5\nc,3\n")
    kept.take(landing.scan(now + 110))
    told = [(item.id, item.responses["y"]) for item in kept.items]
    assert told == [("a", 1), ("b", 2), ("a", 1), ("b", 25), ("c", 3)]
    assert kept.changes[-1] == ("results/x.csv", "rewritten", 3)


def test_a_reader_that_fails_in_an_unforeseen_way(plan, results, monkeypatch):
    """Whatever a reader raises over one file (injected), that file is refused; the others go on."""
    for key in ("bad", "good"):
        (results / f"{key}.json").write_text(record(key))

    def failing(data):
        return 1 / (b"bad" not in data) and json.loads(data)

    monkeypatch.setattr("auditd.read.json_document.decode_json", failing)
    kept = Kept().take(Landing(plan).scan(now_after()))
    assert kept.ids == ["good"]
    assert [(one.path, one.kind) for one in kept.refusals] == [("results/bad.json", "file")]
    assert "ZeroDivisionError" in kept.refusals[0].reason


@pytest.mark.slow
def test_idle_on_100000_files(plan, results):
    """Ten minutes of the given clock over 100,000 taken files cost at most 0.5 % of a core."""
    for k in range(100):
        (results / f"d{k}").mkdir()
        for n in range(1000):
            with open(results / f"d{k}" / f"{n}.json", "w", encoding="utf-8") as file:
                file.write(record(f"r{k}-{n}"))
    landing, now = Landing(plan), now_after(60)
    assert sum(1 for _ in landing.scan(now)) == 100_000
    for polls in (False, True):
        landing.pace.polls = polls
        began, start = time.process_time(), now
        while now < start + 600:
            assert not list(landing.visit(now))
            now += max(0.1, landing.wait_s(now))
        share = (time.process_time() - began) / 600
        assert share <= 0.005, f"polls: {polls}"
