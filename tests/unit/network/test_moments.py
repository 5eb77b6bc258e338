"""Points in time of RFC 3339: published examples, and what is refused on purpose."""

from datetime import UTC, date, datetime, timedelta, timezone

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.network.moments import read_date, read_instant


@pytest.mark.parametrize(
    ("text", "utc"),
    [
        ("1985-04-12T23:20:50.52Z", "1985-04-12T23:20:50.52Z"),
        ("1996-12-19T16:39:57-08:00", "1996-12-20T00:39:57Z"),
        ("1937-01-01T12:00:27.87+00:20", "1937-01-01T11:40:27.87Z"),
    ],
)
def test_the_examples_of_rfc_3339_are_read(text: str, utc: str) -> None:
    """Source: RFC 3339, section 5.8 (examples), converted by hand."""
    assert read_instant(text).utc == utc


@pytest.mark.parametrize(
    ("text", "why"),
    [
        ("1985-04-12", "no time"),
        ("1985-04-12T23:20:50", "no offset"),
        ("1985-02-29T00:00:00Z", "no such day"),
        ("1985-04-12T24:00:00Z", "no such hour"),
        ("1985-04-12T23:60:00Z", "no such minute"),
        ("1985-04-12T23:20:50+24:00", "no such offset"),
        ("1985-04-12T23:20:50+0100", "an offset without its colon"),
        ("1985-04-12 23:20:50Z", "a space"),
        ("1985-04-12T23:20:50Z\n", "a line feed"),
        ("198\u0665-04-12T23:20:50Z", "a digit that is not ASCII"),
        ("0000-01-01T00:00:00Z", "the year 0, which the calendar here does not have"),
        ("0001-01-01T00:00:00+01:00", "an instant before the year 1"),
        ("1985-04-12T23:20:50.1234567891Z", "more than nine decimals"),
    ],
)
def test_other_texts_are_refused(text: str, why: str) -> None:
    """A time that has to be guessed moves a cut-off."""
    with pytest.raises(ValueError, match=r"offset|nine decimals"):
        read_instant(text)
    assert why


def test_a_leap_second_is_refused_by_name() -> None:
    """RFC 3339, section 5.7 allows 23:59:60; reading it as the next second could move a date."""
    with pytest.raises(ValueError, match="leap second"):
        read_instant("1990-12-31T23:59:60Z")


def test_one_instant_has_one_spelling_in_utc_and_one_where_it_was_said() -> None:
    """The digest of a network depends on what is meant; the local date decides what it is for."""
    instant = read_instant("2026-02-04t00:30:00.500+01:00")

    assert instant.utc == "2026-02-03T23:30:00.5Z"
    assert instant.local == "2026-02-04T00:30:00.5+01:00"
    assert instant.local_date == date(2026, 2, 4)
    assert read_instant("2026-02-03T23:30:00-00:00").local == "2026-02-03T23:30:00Z"


@given(
    st.datetimes(min_value=datetime(2, 1, 1), max_value=datetime(9998, 12, 31)),  # noqa: DTZ001 - walls
    st.integers(-1439, 1439),
)
def test_instants_agree_with_the_standard_library(wall: datetime, offset_minutes: int) -> None:
    """Python's own reading of the same text is the same instant."""
    expected = wall.replace(tzinfo=timezone(timedelta(minutes=offset_minutes)))

    instant = read_instant(expected.isoformat())

    assert datetime.fromisoformat(instant.utc) == expected
    since = expected - datetime(1970, 1, 1, tzinfo=UTC)
    assert instant.nanoseconds == since // timedelta(microseconds=1) * 1000


@pytest.mark.parametrize("text", ["2026-2-3", "2026-02-30", "20260203", "2026-W06-2", ""])
def test_dates_have_one_form(text: str) -> None:
    """Other forms of ISO 8601 are not what a planner's system sends by intention."""
    with pytest.raises(ValueError, match="2026-02-03"):
        read_date(text)
    assert read_date("2024-02-29") == date(2024, 2, 29)
