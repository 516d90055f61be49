"""Instants to microseconds and back, exactly."""

from datetime import UTC, datetime, timedelta, timezone

import pytest
from hypothesis import given
from hypothesis import strategies as st

from auditd.store.clock import from_us, rfc3339, to_us


@given(st.datetimes(timezones=st.sampled_from([UTC, timezone(timedelta(hours=-9, minutes=-30))])))
def test_every_time_comes_back_to_the_microsecond(at):
    """Also before 1970 and with an offset; a float of seconds would lose digits."""
    assert from_us(to_us(at)) == at


@pytest.mark.parametrize(
    ("at", "at_us"),
    [
        (datetime(1970, 1, 1, tzinfo=UTC), 0),
        (datetime(1969, 12, 31, 23, 59, 59, 999999, tzinfo=UTC), -1),
        (datetime(2001, 9, 9, 1, 46, 40, tzinfo=UTC), 10**15),
    ],
)
def test_known_instants(at, at_us):
    """10**9 s after the epoch is 2001-09-09T01:46:40Z (from memory)."""
    assert (to_us(at), from_us(at_us)) == (at_us, at)


def test_times_are_shown_as_rfc_3339_in_utc():
    """Z for the zone, a fraction only where there is one (RFC 3339, section 5.6)."""
    east = timezone(timedelta(hours=2))
    assert rfc3339(datetime(2031, 5, 1, 1, 2, 3, tzinfo=east)) == "2031-04-30T23:02:03Z"
    assert rfc3339(datetime(2031, 5, 1, 1, 2, 3, 4000, tzinfo=UTC)) == "2031-05-01T01:02:03.004000Z"
    assert rfc3339(None) is None
