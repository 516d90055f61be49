"""Where the store is, and which places cannot hold one."""

import pathlib

import pytest

from auditd.errors import PlanError, StoreError
from auditd.plan_reading import parse_plan
from auditd.store import place
from auditd.store.place import filesystem_of, store_url

SMALL = '[responses.error]\nat = "error"\n'
MOUNTS = """\
22 1 8:1 / / rw,relatime shared:1 - ext4 /dev/sda1 rw
40 22 0:35 / /home rw - nfs4 server:/home rw
41 40 0:36 / /home/me/local\\040disk rw - xfs /dev/sdb1 rw
42 22 0:37 / /odd\\134name rw - tmpfs tmpfs rw
43 22 0:38 / /homes rw master:1 propagate_from:2 - btrfs /dev/sdc rw
44 22 0:39 / /over rw - ext4 /dev/sdd rw
45 44 0:40 / /over rw - fuse.sshfs me@host: rw
"""


@pytest.fixture
def mounts(monkeypatch):
    """A machine's mounts as proc(5) writes them; paths are taken as they are."""
    monkeypatch.setattr(pathlib.Path, "read_text", lambda _self, **_options: MOUNTS)
    monkeypatch.setattr(place.os.path, "realpath", str)


@pytest.mark.parametrize(
    ("folder", "kind"),
    [
        ("/", "ext4"),
        ("/home/me/study", "nfs4"),
        ("/home", "nfs4"),
        ("/home/me/local disk/study", "xfs"),
        ("/odd\\name/x", "tmpfs"),
        ("/homes/x", "btrfs"),
        ("/homestead", "ext4"),
        ("/over/x", "fuse.sshfs"),
    ],
)
def test_the_longest_and_last_mount_that_holds_a_folder_tells_its_filesystem(mounts, folder, kind):
    """Names with blanks and backslashes, mounts over mounts, and names that only begin alike."""
    assert filesystem_of(pathlib.Path(folder)) == kind


def test_this_machines_own_mounts_are_read():
    """/proc is there wherever the test runs."""
    assert filesystem_of(pathlib.Path("/proc/self")) == "proc"


@pytest.mark.parametrize(
    ("url", "file"),
    [
        (None, "/data/study/.runaudit/store.sqlite"),
        ("sqlite:///audit.sqlite", "/data/study/audit.sqlite"),
        ("sqlite:///kept/a b.sqlite", "/data/study/kept/a b.sqlite"),
        ("sqlite:////elsewhere/audit.sqlite", "/elsewhere/audit.sqlite"),
    ],
)
def test_a_file_is_named_from_the_plans_folder(monkeypatch, url, file):
    """Beside the plan by default."""
    monkeypatch.setattr(place, "filesystem_of", lambda _folder: "ext4")
    text = SMALL + ("" if url is None else f'[store]\nurl = "{url}"\n')
    assert store_url(parse_plan(text, pathlib.Path("/data/study/plan.toml"))).database == file


def test_a_plan_on_a_network_filesystem_has_its_store_in_the_users_state_folder(monkeypatch):
    """Two plans have two stores; a stated file there is refused."""
    monkeypatch.setattr(place, "filesystem_of", lambda _folder: "nfs4")
    monkeypatch.setenv("XDG_STATE_HOME", "/state")
    files = [store_url(parse_plan(SMALL, pathlib.Path(f"/net/{name}/plan.toml"))).database for name in "ab"]
    assert files[0] != files[1]
    assert all(file.startswith("/state/runaudit/") for file in files)
    stated = parse_plan(SMALL + '[store]\nurl = "sqlite:///audit.sqlite"\n', pathlib.Path("/net/plan.toml"))
    with pytest.raises(StoreError, match=r"network filesystem \(nfs4\)"):
        store_url(stated)


def test_a_link_to_a_network_filesystem_is_seen_through(monkeypatch, tmp_path):
    """Not the link's folder decides, but that of the file."""
    (tmp_path / "net").mkdir()
    (tmp_path / "audit.sqlite").symlink_to(tmp_path / "net" / "audit.sqlite")
    monkeypatch.setattr(place, "filesystem_of", lambda folder: "nfs" if folder.name == "net" else "ext4")
    plan = parse_plan(SMALL + '[store]\nurl = "sqlite:///audit.sqlite"\n', tmp_path / "plan.toml")
    with pytest.raises(StoreError, match="network filesystem"):
        store_url(plan)


@pytest.mark.parametrize("url", ["mysql://x/y", "sqlite://", "nonsense", "://"])
def test_another_kind_of_store_is_refused(url):
    """With what may be written."""
    with pytest.raises(PlanError, match=r"sqlite:///audit\.sqlite"):
        store_url(parse_plan(f'{SMALL}[store]\nurl = "{url}"\n'))


@pytest.mark.parametrize("scheme", ["postgresql", "postgresql+psycopg"])
def test_a_server_is_reached_by_psycopg(scheme):
    """Whichever way its address is written."""
    url = store_url(parse_plan(f'{SMALL}[store]\nurl = "{scheme}://me:pw@db/audit"\n'))
    assert url.drivername == "postgresql+psycopg"
