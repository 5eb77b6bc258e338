"""Exact numbers: what is read is what was written, and nothing passes a float."""

import re
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.network.columns import Decimals
from service.network.quantities import (
    NumberFaultError,
    exact_sum,
    exact_text,
    parse_exact,
    read_decimal,
    read_decimals,
)

PATTERN = re.compile(r"-?(?:0|[1-9][0-9]*)(?:\.[0-9]+)?")
FRACTIONS = st.fractions(min_value=-(10**12), max_value=10**12, max_denominator=10**6)
NEAR_NUMBERS = st.one_of(
    st.from_regex(PATTERN, fullmatch=True),
    st.text(alphabet="0123456789.-+eE \n\u0661", max_size=8),
    st.integers(-(10**20), 10**20).map(str),
)


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (Fraction("224.40"), "224.4"),
        (Fraction(0), "0"),
        (Fraction("-1.05"), "-1.05"),
        (Fraction(1, 8), "0.125"),
        (Fraction(5, 48), "5/48"),
        (Fraction(10**21), "1000000000000000000000"),
        (Fraction(1, 3 * 10**6), "1/3000000"),
    ],
)
def test_text_is_the_shortest_decimal_or_a_ratio(value: Fraction, text: str) -> None:
    """A person reads decimals; a pallet of 48 makes amounts that have none."""
    assert exact_text(value) == text
    assert parse_exact(text) == value


@given(FRACTIONS)
def test_exact_text_is_read_back_unchanged(value: Fraction) -> None:
    """What a plan says must be what was computed, to the last digit."""
    assert parse_exact(exact_text(value)) == value


@pytest.mark.parametrize(
    "text", ["", "1e3", "+1", "01", "1.", ".5", "1/0", "2/", "1_0", "9" * 5000]
)
def test_other_forms_of_exact_numbers_are_refused(text: str) -> None:
    """A certificate is read by strict eyes: one number has one spelling."""
    with pytest.raises(ValueError, match="not an exact number"):
        parse_exact(text)


@given(st.lists(NEAR_NUMBERS, max_size=12))
def test_a_column_is_read_as_each_number_by_itself(texts: list[str]) -> None:
    """The array operations must agree with one regular expression and Python's fractions."""
    read = read_decimals(texts, decimals_max=6)

    malformed = [row for row, text in enumerate(texts) if not PATTERN.fullmatch(text)]
    too_fine = [
        row
        for row, text in enumerate(texts)
        if row not in malformed and len(text.partition(".")[2]) > 6
    ]
    assert read.malformed.tolist() == malformed
    assert read.too_fine.tolist() == too_fine
    for row, text in enumerate(texts):
        if row in malformed or row in too_fine:
            assert read.decimals.fraction(row) is None
        elif row in read.too_large.tolist():
            assert abs(Fraction(text)) * 10**6 >= 2**62
        else:
            assert read.decimals.fraction(row) == Fraction(text)
    assert np.all(read.decimals.values[~read.decimals.present] == 0)


def test_the_exponent_of_a_column_is_minimal() -> None:
    """One value must have one byte form, whatever zeros were written behind it."""
    read = read_decimals(["1.500", "2", "-0"], decimals_max=3)

    assert read.decimals.exponent == 1
    assert read.decimals.values.tolist() == [15, 20, 0]


def test_scaled_values_stay_below_two_to_the_62() -> None:
    """The sum of two values must not leave 64 bits."""
    fits, too_large = str(2**62 - 1), str(2**62)

    assert read_decimals([fits], decimals_max=0).too_large.size == 0
    assert read_decimals([too_large, fits], decimals_max=0).too_large.tolist() == [0]
    # Next to a value with one decimal the whole column is scaled by ten.
    assert read_decimals([fits, "0.1"], decimals_max=1).too_large.tolist() == [0]


def test_rows_without_a_value_are_absent_whatever_stands_there() -> None:
    """Null is no number and no fault."""
    read = read_decimals(["", "7"], present=np.array([False, True]), decimals_max=0)

    assert read.decimals.present.tolist() == [False, True]
    assert read.malformed.size == 0


def test_a_sum_beyond_64_bits_is_exact() -> None:
    """Control totals are compared exactly, however large."""
    values = np.full(9, -(2**62 - 1), dtype=np.int64)
    column = Decimals(values=values, present=np.ones(9, dtype=np.bool_), exponent=1)

    assert exact_sum(column) == Fraction(-9 * (2**62 - 1), 10)


@pytest.mark.parametrize(
    ("text", "code"),
    [
        ("1e3", "not_a_number"),
        ("0.1234", "too_many_decimals"),
        ("4611686018427387904", "number_too_large"),
        ("9" * 400, "number_too_large"),
    ],
)
def test_one_number_is_refused_with_its_code(text: str, code: str) -> None:
    """The small parts of a network get the codes that its columns get."""
    with pytest.raises(NumberFaultError) as caught:
        read_decimal(text, decimals_max=3)

    assert caught.value.code == code
    read = read_decimals([text], decimals_max=3)
    by_code = {
        "not_a_number": read.malformed,
        "too_many_decimals": read.too_fine,
        "number_too_large": read.too_large,
    }
    assert by_code[code].tolist() == [0]
