"""How numbers and tables look: right to the last digit, or marked as rounded."""

from fractions import Fraction

import pytest

from service.doors.command_line.layout import clipped, count_of, grouped, percent, table, to_digits


@pytest.mark.parametrize(
    ("value", "text"),
    [
        ("0", "0"),
        ("999", "999"),
        ("1000", "1 000"),
        ("1234567.5", "1 234 567.5"),
        ("-1234.05", "-1 234.05"),
        ("0.001", "0.001"),
        ("40/3", "~13.333"),  # 13 1/3
        ("1/2001", "~0"),
    ],
)
def test_numbers_come_in_groups_of_three_and_say_when_they_are_rounded(
    value: str, text: str
) -> None:
    """A rounded number that looks exact would be copied as if it were."""
    assert grouped(value) == text


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [
        ("31482.56", 2, "31 482.56"),
        ("0.005", 2, "0.01"),
        ("0.015", 2, "0.02"),
        ("-7.5", 2, "-7.50"),
        ("1234.5", 0, "1 235"),
        ("-0.5", 0, "-1"),
    ],
)
def test_money_has_the_decimals_of_its_currency_and_rounds_half_away_from_zero(
    value: str, digits: int, text: str
) -> None:
    """Totals on paper must look alike, in yen as in euros."""
    assert to_digits(value, digits) == text


def test_almost_all_is_not_a_hundred_percent() -> None:
    """Whoever reads 100 % stops looking for the one bag."""
    assert percent(Fraction(99_999), Fraction(100_000)) == "99.9 %"
    assert percent(Fraction(3), Fraction(3)) == "100.0 %"


def test_one_is_singular() -> None:
    """The summary is read aloud in the morning meeting."""
    assert (count_of(1, "line"), count_of(1200, "line")) == ("1 line", "1 200 lines")


def test_what_is_cut_says_so() -> None:
    """An id cut in silence names another thing."""
    assert clipped("abcdef", 4) == "abc…"
    assert clipped("abcd", 4) == "abcd"


def test_columns_line_up_and_stay_within_the_width() -> None:
    """Numbers under numbers, so that the eye finds the large one."""
    lines = table(("n", "what"), [("5", "a"), ("1 000", "b" * 200)], right=(0,))

    assert lines[0] == "      n  what"
    assert lines[1] == "      5  a"
    assert lines[2].startswith("  1 000  bbb")
    assert len(lines[2]) == 100
