"""Many amounts of one unit are written exactly as each alone would be."""

from fractions import Fraction

from hypothesis import given
from hypothesis import strategies as st

from service.planning.documents.amounts import text, texts

NUMBERS = st.integers(-(10**12), 10**12) | st.integers(-(2**70), 2**70) | st.integers(-99, 99)
DECIMALS = st.builds(Fraction, st.integers(1, 10**6), st.sampled_from([1, 2, 8, 25, 10**6, 10**9]))


def test_units_with_and_without_an_end_are_written_exactly() -> None:
    """0.05 times 1234, 20 and -1 are 61.7, 1 and -0.05; thirds have no end and stay ratios."""
    assert texts([1234, 20, 0, -1], Fraction(1, 20)) == ["61.7", "1", "0", "-0.05"]
    assert texts([1, 3, 0], Fraction(1, 3)) == ["1/3", "1", "0"]
    assert texts([7, 0], Fraction(40)) == ["280", "0"]


@given(st.lists(NUMBERS), DECIMALS | st.fractions(min_value=Fraction(1, 10**6)))
def test_column_is_written_as_its_numbers_are(numbers: list[int], unit: Fraction) -> None:
    """Whatever the unit, large numbers included."""
    assert texts(numbers, unit) == [text(number * unit) for number in numbers]
