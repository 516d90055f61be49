"""The page from the store: what it says of odd campaigns, what it adds up, and how it is written."""

import base64
import hashlib
import json
import os
import re
import time
from datetime import UTC, datetime

import numpy as np
import pytest
from campaigns_made import PLAN, append, lay_out, records, runaudit

from auditd.errors import CannotCreate
from auditd.pipeline.campaign import open_for_queries, open_for_taking
from auditd.pipeline.evidence_paths import N_STRETCHES, PathRecorder
from auditd.pipeline.report_keeping import ReportKeeper
from auditd.pipeline.reporting import report_html, write_report
from auditd.pipeline.session import Session
from auditd.sequential import Advanced

NOW = datetime(2027, 4, 1, 12, tzinfo=UTC)


def gathered(folder, runs, plan=PLAN):
    path = lay_out(folder, plan)
    append(folder, runs)
    done = runaudit(path, "gather")
    assert done.returncode == 0, done.stderr
    return path


def page_of(path):
    return report_html(open_for_queries(path), NOW)


def words(html):
    return " ".join(re.sub(r"<[^>]+>", " ", html).split())


def test_an_empty_campaign_gives_a_page_that_says_so(tmp_path):
    """No run: one page, no picture, no number made up."""
    text = page_of(gathered(tmp_path, []))
    assert "No run has landed yet" in text
    assert "<svg" not in text


def test_one_run_gives_a_page_that_says_so(tmp_path):
    """One run: nothing is said about dependence."""
    assert "One run says nothing about dependence" in words(page_of(gathered(tmp_path, records(1))))


def test_constant_responses_give_a_page_that_says_so(tmp_path):
    """Constant results: no autocorrelation, no quantiles, and the reason."""
    runs = records(60)
    for run in runs:
        run["out"] = {"energy": 1.5, "steps": 3.0}
    text = words(page_of(gathered(tmp_path, runs)))
    assert "Not drawn: the results are constant within every cell" in text
    assert "results that do not vary" in text


def test_missing_times_give_a_page_that_says_so(tmp_path):
    """Without a start nothing is told by time, and the page says that."""
    plan = PLAN.replace('started = "/time/start"\n', "").replace('finished = "/time/end"\n', "")
    plan = plan.replace('by = "started"\npatience = "30m"', 'by = "arrival"')
    text = words(page_of(gathered(tmp_path, records(60), plan)))
    assert "No run states when it started" in text
    assert "daily cycles and overlaps cannot be seen" in text


@pytest.fixture(scope="module")
def campaign(tmp_path_factory):
    """A campaign with a fault on a host, failures, a refusal, a set-aside answer, an amendment and a look."""
    folder = tmp_path_factory.mktemp("reporting")
    runs = records(300, seed=4, step_at=120, failing=range(30, 40))
    path = gathered(folder, [*runs, {"id": "broken"}])
    first = json.loads(runaudit(path, "warnings", "--json").stdout)["warnings"][0]["id"]
    done = runaudit(path, "answer", first, "fan was broken", "--set-aside", "host=h2", "--from", "r00120")
    assert done.returncode == 0, done.stderr
    assert runaudit(path, "compare").returncode == 0
    append(folder, records(310, seed=4)[300:])
    assert runaudit(path, "gather").returncode == 0
    return path


def test_the_same_store_and_clock_give_the_same_bytes(campaign):
    """Two pages of one moment are identical, also by the command under SOURCE_DATE_EPOCH."""
    assert page_of(campaign) == page_of(campaign)
    made = []
    for name in ("one.html", "two.html"):
        path = campaign.parent / name
        env = {"SOURCE_DATE_EPOCH": str(int(NOW.timestamp()))}
        assert runaudit(campaign, "report", "-o", str(path), env=env).returncode == 0
        made.append(path.read_bytes())
    assert made[0] == made[1]
    assert b"2027-04-01T12:00:00Z" in made[0]


def test_the_policy_allows_the_one_style_sheet_and_nothing_else(campaign):
    """The stated hash is that of the style element; no style attribute, no script, no address is loaded."""
    text = page_of(campaign)
    style = re.search(r"<style>(.*?)</style>", text, re.DOTALL)[1]
    digest = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode()
    policy = re.search(r'Content-Security-Policy" content="([^"]+)"', text)[1].replace("&#39;", "'")
    assert policy.startswith("default-src 'none'")
    assert f"style-src 'sha256-{digest}'" in policy
    assert not re.search(r"<[^>]+\s(style|on\w+|src)=", text)
    assert "<script" not in text
    assert "<link" not in text


def test_the_accounting_adds_up(campaign):
    """In each column landed less failed, unusable and set aside is analysed."""
    text = page_of(campaign)
    section = text.split('id="accounting"')[1].split("</table>")[0]
    rows = [re.findall(r"<td>(.*?)</td>", row) for row in re.findall(r"<tr>(.*?)</tr>", section)[1:]]
    numbers = [
        [int(cell.replace(",", "").replace("− ", "").replace("–", "0")) for cell in row[1:]] for row in rows
    ]
    for landed, failed, unusable, aside, analysed, *_ in zip(*numbers, strict=True):
        assert landed - failed - unusable - aside == analysed
    assert numbers[0][0] == 310
    assert any(numbers[3])
    assert "311 records read = 310 runs + 1 refused" in words(text)


def test_what_was_done_is_on_record(campaign):
    """Answer, set-aside runs, look, epoch key and methods are stated."""
    text = words(page_of(campaign))
    assert "fan was broken" in text
    assert "set-aside host=h2" in text
    assert "(with set-aside runs)" in text
    assert "00ff" in text
    assert "they were looked at once by command before this report" in text
    assert "Vovk, Gammerman &amp; Shafer 2005" in text
    assert "at most 0.05" in text


def test_a_page_is_whole_or_not_written(campaign, tmp_path, monkeypatch):
    """A failure while writing leaves the older page as it was and no part of a new one."""
    path = tmp_path / "page.html"
    path.write_text("older")

    def fail(*_arguments):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", fail)
    with pytest.raises(CannotCreate, match="No space left"):
        write_report(open_for_queries(campaign), path, NOW)
    assert path.read_text() == "older"
    assert os.listdir(tmp_path) == ["page.html"]


@pytest.mark.parametrize("name", ["", "missing/page.html"])
def test_a_place_that_cannot_be_written_is_said_with_exit_73(campaign, tmp_path, name):
    """A folder in place of a file, or a missing folder: exit 73 and the reason."""
    done = runaudit(campaign, "report", "-o", str(tmp_path / name))
    assert done.returncode == 73
    assert "folder" in done.stderr


def advanced(path):
    """What an auditor gives for a block, as far as the recorder looks."""
    return Advanced(
        first=0, scores=path, log_e={("drift", "order"): 2 * path}, log_mean=path, alarms=()
    )  # fmt: skip


def test_paths_depend_on_runs_and_not_on_blocks():
    """However runs are split into blocks the same stretches are kept, with the highest value of each."""
    path = np.cumsum(np.random.default_rng(2).normal(size=3000))
    whole, parts = PathRecorder(), PathRecorder()
    whole.take(advanced(path))
    for part in np.split(path, [1, 7, 300, 301, 2222]):
        parts.take(advanced(part))
    assert np.array_equal(whole.highest, parts.highest)
    assert whole.width == parts.width == 16
    n = -(-3000 // 16)
    kept = whole.highest[0, :n]
    assert n <= N_STRETCHES
    assert kept[3] == path[48:64].max()
    assert kept.max() == path.max()


def test_the_keeper_writes_the_page_beside_the_daemon(tmp_path):
    """It begins when runs have come, writes the page by a process of its own, and then rests."""
    plan = PLAN + '\n[report]\npath = "fresh.html"\nevery = "1s"\n'
    path = gathered(tmp_path, records(40), plan)
    keeper = ReportKeeper(Session(open_for_taking(path)))
    assert keeper.refresh_if_due(1000.0)
    assert not keeper.refresh_if_due(1000.5)
    limit = time.monotonic() + 90
    while keeper._child is not None and time.monotonic() < limit:
        time.sleep(0.1)
        keeper.refresh_if_due(1001.0)
    assert (tmp_path / "fresh.html").read_text().startswith("<!DOCTYPE html>")
    assert not keeper.refresh_if_due(1e9)
    keeper.close()


def test_without_a_section_the_keeper_does_nothing(tmp_path):
    """No [report], no page."""
    keeper = ReportKeeper(Session(open_for_taking(gathered(tmp_path, records(5)))))
    assert not keeper.refresh_if_due(1e9)
