"""Playback and the sample's command line refuse what they cannot use."""

import pytest

from auditd.errors import BadInput
from auditd.simulate.playback import pieces
from auditd.simulate.sample_logs import _write_from_command_line


def test_folder_without_results_is_refused(tmp_path):
    with pytest.raises(BadInput, match="no result files"):
        pieces(tmp_path)


@pytest.mark.parametrize(
    ("name", "content"),
    [
        ("a.ndjson", b'{"run": 1}\n'),
        ("a.json", b"[1, 2]"),
        ("a.txt", b"x"),
        ("a.json", b"[]"),
        ("a.csv", b"run\n1\n"),
    ],
)
def test_files_that_are_no_sample_are_refused_by_name(tmp_path, name, content):
    (tmp_path / "results").mkdir()
    (tmp_path / "results" / name).write_bytes(content)
    with pytest.raises(BadInput, match=name.replace(".", r"\.")):
        pieces(tmp_path)


def test_command_line_writes_the_files_and_refuses_bad_usage(tmp_path, capsys):
    assert _write_from_command_line([str(tmp_path / "out")]) == 0
    assert (tmp_path / "out" / "faulty" / "plan.toml").is_file()
    assert _write_from_command_line([]) == 64
    (tmp_path / "file").write_text("x", encoding="utf-8")
    assert _write_from_command_line([str(tmp_path / "file")]) == 73
    assert "cannot be written" in capsys.readouterr().err
