"""A daemon that is killed at any moment takes each run once and tells what an undisturbed one tells."""

import pytest
from kills import alerted, delivered, places, play, told

pytestmark = [pytest.mark.slow, pytest.mark.timeout(300)]


def test_kills_lose_nothing_take_nothing_twice_and_change_no_warning(tmp_path):
    """Runs, places, warnings (kind, run, log_e to nine decimals) and outbox are those of one gather."""
    killed, whole = play(tmp_path, 5_000, 15, say=lambda *_, **__: None)
    ids = [row[0] for row in places(killed)]
    assert len(ids) == len(set(ids)) == 5_000
    assert places(killed) == places(whole)
    assert told(killed) == told(whole)
    kinds = {row[0] for row in told(killed)}
    assert "seed" in kinds
    assert kinds & {"drift", "serial"}
    with_alerts, alert_ids = alerted(killed)
    assert with_alerts == alerted(whole)[0]
    assert len(alert_ids) == len(set(alert_ids))
    assert set(alert_ids) <= set(delivered(killed))
