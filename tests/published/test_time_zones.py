"""Dates on both sides of a change of the clocks, by law, and instants of RFC 3339.

Summer time in the European Union begins at 1:00 GMT on the last Sunday of March (Directive
2000/84/EC, article 2): in 2026 on 29 March, when Oslo (which follows it) goes from +01:00 to
+02:00. In the United States it begins at 2:00 local time on the second Sunday of March (Energy
Policy Act of 2005, section 110): in 2026 on 8 March, when New York goes from -05:00 to -04:00.
Tokyo has none.
"""

import pytest

from service.network.moments import read_instant
from service.network.time_zones import at_zone


@pytest.mark.parametrize(
    ("instant", "zone", "local"),
    [
        # A second before and at the change: the local clock jumps from 2:00 to 3:00.
        ("2026-03-29T00:59:59Z", "Europe/Oslo", "2026-03-29T01:59:59+01:00"),
        ("2026-03-29T01:00:00Z", "Europe/Oslo", "2026-03-29T03:00:00+02:00"),
        ("2026-03-08T06:59:59Z", "America/New_York", "2026-03-08T01:59:59-05:00"),
        ("2026-03-08T07:00:00Z", "America/New_York", "2026-03-08T03:00:00-04:00"),
        # One instant, three dates in words of those who live there.
        ("2026-02-03T23:30:00Z", "Europe/Oslo", "2026-02-04T00:30:00+01:00"),
        ("2026-02-03T23:30:00Z", "America/New_York", "2026-02-03T18:30:00-05:00"),
        ("2026-02-03T23:30:00Z", "Asia/Tokyo", "2026-02-04T08:30:00+09:00"),
        # Summer time moves a date: 22:30 by GMT is the next day in Oslo only then.
        ("2026-03-28T22:30:00Z", "Europe/Oslo", "2026-03-28T23:30:00+01:00"),
        ("2026-03-29T22:30:00Z", "Europe/Oslo", "2026-03-30T00:30:00+02:00"),
        ("2026-02-03T12:00:00.250Z", "Europe/London", "2026-02-03T12:00:00.25Z"),
    ],
)
def test_an_instant_is_shown_as_the_clocks_at_its_site_do(
    instant: str, zone: str, local: str
) -> None:
    """The date of a departure is that of the people who load it."""
    assert at_zone(instant, zone) == local


def test_two_spellings_of_one_instant_are_one() -> None:
    """RFC 3339, section 5.8: 1996-12-19T16:39:57-08:00 is 1996-12-20T00:39:57Z."""
    pacific, utc = read_instant("1996-12-19T16:39:57-08:00"), read_instant("1996-12-20T00:39:57Z")

    assert pacific.nanoseconds == utc.nanoseconds
    assert at_zone(utc.local, "America/Los_Angeles") == pacific.local


def test_without_a_zone_an_instant_keeps_the_offset_it_was_sent_with() -> None:
    """Its date is then that of the sender."""
    assert at_zone("1990-12-31T15:59:59-08:00", None) == "1990-12-31T15:59:59-08:00"
