"""Exact columns: Python's own integers are the oracle, far beyond 64 bits."""

from fractions import Fraction

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from service.proof.exact import (
    floor_of,
    joined,
    magnitude,
    plus,
    sums_at,
    times,
    total,
    whole,
    whole_of,
)

NUMBERS = st.integers(-(2**70), 2**70) | st.integers(-100, 100)
COLUMNS = st.lists(NUMBERS, max_size=6)
SMALL = st.lists(st.integers(-(2**63) + 1, 2**63 - 1), max_size=6)
RATIOS = st.builds(Fraction, NUMBERS, st.integers(1, 2**70))


@given(COLUMNS)
def test_column_holds_the_numbers_it_was_given(values: list[int]) -> None:
    """In 64 bits where they fit, else as Python's integers."""
    column = whole(values)

    assert column.tolist() == values
    assert magnitude(column) == max(map(abs, values), default=0)
    assert (column.dtype == np.int64) == all(abs(value) < 2**62 for value in values)


@given(SMALL, NUMBERS)
def test_products_do_not_overflow(values: list[int], factor: int) -> None:
    """Also not from columns of 64 bits at the edge of their range."""
    column = np.array(values, dtype=np.int64)

    assert times(column, factor).tolist() == [value * factor for value in values]


@given(SMALL, st.data())
def test_sums_do_not_overflow(values: list[int], data: st.DataObject) -> None:
    """Element by element, at places, and all together."""
    others = data.draw(
        st.lists(st.integers(-(2**63) + 1, 2**63 - 1), min_size=len(values), max_size=len(values))
    )
    places = data.draw(st.lists(st.integers(0, 2), min_size=len(values), max_size=len(values)))
    first, second = np.array(values, dtype=np.int64), np.array(others, dtype=np.int64)
    at = np.array(places, dtype=np.int64)

    expected = [
        sum(value for value, place in zip(values, places, strict=True) if place == number)
        for number in range(3)
    ]
    assert plus(first, second).tolist() == [a + b for a, b in zip(values, others, strict=True)]
    assert sums_at(3, at, first).tolist() == expected
    assert total(first) == sum(values)
    assert joined([first, whole([2**80])]).tolist() == [*values, 2**80]


@given(SMALL, RATIOS)
def test_ratios_are_rounded_down_and_rests_are_seen(values: list[int], ratio: Fraction) -> None:
    """Floor towards minus infinity, and where it was not whole."""
    column = np.array(values, dtype=np.int64)
    exact = [value * ratio for value in values]

    rounded, broken = whole_of(column, ratio)

    assert floor_of(column, ratio).tolist() == [value // 1 for value in exact]
    assert rounded.tolist() == [value // 1 for value in exact]
    assert broken.tolist() == [value.denominator != 1 for value in exact]
