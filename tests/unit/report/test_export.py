"""Rows for other programs: exact, after the standard, harmless in a spreadsheet, whole or not written."""

import csv
import io
import json
import subprocess
import sys

import numpy as np
import pytest
from campaigns_made import append, lay_out, records, runaudit

from auditd.errors import BadInput
from auditd.pipeline.export_formats import Column, Table, harmless, write_csv, write_json, write_parquet

FORMULA = '=HYPERLINK("http://192.0.2.1/","x")'


@pytest.fixture(scope="module")
def campaign(tmp_path_factory):
    folder = tmp_path_factory.mktemp("export")
    plan = lay_out(folder)
    runs = records(120, seed=9, step_at=40, failing=(7,))
    runs[3]["env"]["host"] = FORMULA
    runs[4]["note"] = 'comma, "quote"\nline'
    append(folder, runs)
    assert runaudit(plan, "gather").returncode == 0
    return plan, runs


def table(campaign, what):
    """An export as CSV, read back by the standard library."""
    done = runaudit(campaign[0], "export", what)
    assert done.returncode == 0, done.stderr
    return list(csv.DictReader(io.StringIO(done.stdout, newline="")))


def test_numbers_read_back_exactly(campaign):
    """Every response of every run is the double that landed."""
    landed = {one["id"]: one["out"]["energy"] for one in campaign[1]}
    rows = table(campaign, "runs")
    assert len(rows) == 120
    assert {row["id"]: float(row["response.energy"]) for row in rows} == landed


def test_series_hold_residuals_that_sum_to_zero_within_cells(campaign):
    """Value less residual is one level a cell, and residuals of a cell sum to zero."""
    rows = [row for row in table(campaign, "series") if row["response"] == "steps"]
    assert len(rows) == 119
    for cell in {row["cell"] for row in rows}:
        own = [row for row in rows if row["cell"] == cell]
        assert sum(float(row["residual"]) for row in own) == pytest.approx(0, abs=1e-9)
        levels = [float(row["value"]) - float(row["residual"]) for row in own]
        assert np.ptp(levels) < 1e-9


def test_warnings_are_those_of_the_command(campaign):
    """The exported warnings are those that `warnings --json` lists, message for message."""
    listed = json.loads(runaudit(campaign[0], "warnings", "--json").stdout)["warnings"]
    rows = table(campaign, "warnings")
    assert listed
    assert [(row["id"], row["message"]) for row in rows] == [(one["id"], one["message"]) for one in listed]


def test_json_and_parquet_hold_the_same_as_csv(campaign, tmp_path):
    """The three formats have the same columns and rows; texts are as they landed in JSON and Parquet."""
    parquet = pytest.importorskip("pyarrow.parquet")
    rows = table(campaign, "runs")
    found = json.loads(runaudit(campaign[0], "export", "runs", "--format", "json").stdout)
    assert found["schema"] == 1
    path = tmp_path / "runs.parquet"
    assert runaudit(campaign[0], "export", "runs", "--format", "parquet", "-o", str(path)).returncode == 0
    typed = parquet.read_table(path).to_pylist()
    assert [list(one) for one in (rows[0], found["runs"][0], typed[0])] == [list(rows[0])] * 3
    for row, plain, own in zip(rows, found["runs"], typed, strict=True):
        assert row["id"] == plain["id"] == own["id"]
        assert float(row["response.energy"]) == plain["response.energy"] == own["response.energy"]
    assert FORMULA in {one["nuisance.host"] for one in typed}
    assert FORMULA in {one["nuisance.host"] for one in found["runs"]}
    assert f"'{FORMULA}" in {row["nuisance.host"] for row in rows}


def written(writer, rows):
    sink = io.BytesIO()
    writer("runs", Table(columns=[Column("a", "text"), Column("b", "number")], rows=rows), sink)
    return sink.getvalue()


def test_csv_is_after_rfc_4180():
    """CRLF line ends, quotes doubled, line ends and commas within quotes (RFC 4180, section 2)."""
    text = written(write_csv, [['a "b", c', 0.1], ["x\ny", float("nan")], [None, None]])
    assert text == b'a,b\r\n"a ""b"", c",0.1\r\n"x\ny",nan\r\n,\r\n'


def test_json_has_null_where_it_has_no_number():
    """NaN and infinities are null: JSON has none (RFC 8259, section 6)."""
    found = json.loads(written(write_json, [["x", float("inf")], ["y", 1e-300]]))
    assert [row["b"] for row in found["runs"]] == [None, 1e-300]


@pytest.mark.parametrize(
    ("text", "shown"), [("=1+1", "'=1+1"), ("@x", "'@x"), ("-2.5", "-2.5"), ("-x", "'-x"), ("a=1", "a=1")]
)
def test_no_text_acts_as_a_formula(text, shown):
    """Signs that begin a formula are defused, numbers are not touched (OWASP, CSV Injection)."""
    assert harmless(text) == shown


def test_parquet_without_its_package_is_said(monkeypatch):
    """Without pyarrow the message names what to install."""
    monkeypatch.setitem(sys.modules, "pyarrow", None)
    with pytest.raises(BadInput, match=r"auditd\[parquet\]"):
        written(write_parquet, [])


def test_parquet_needs_a_file(campaign):
    """Binary data never go to a terminal: exit 73."""
    assert runaudit(campaign[0], "export", "runs", "--format", "parquet").returncode == 73


def test_a_reader_that_leaves_early_is_no_error(campaign):
    """A pipe that nobody reads ends the command with 0 and without a word."""
    command = [sys.executable, "-P", "-m", "auditd", "--plan", str(campaign[0]), "export", "runs"]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE) as child:
        child.stdout.close()
        said = child.stderr.read()
        assert child.wait(timeout=60) == 0
    assert said == b""
