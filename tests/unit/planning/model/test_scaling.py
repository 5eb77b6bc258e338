"""Money and quantities become integers without losing anything."""

from fractions import Fraction

import numpy as np
import pytest

from service.planning.model.limits import NumbersTooLargeError
from service.planning.model.scaling import Rationals, common_divisor, common_grid, cost_scale


def test_scale_is_least_common_denominator_over_greatest_common_divisor() -> None:
    """0.5, 0.75 and 1/48: in 48ths 24, 36 and 1; without 1/48 in quarters 2 and 3."""
    assert cost_scale([Fraction(1, 2), Fraction(3, 4)]) == 4
    assert cost_scale([Fraction(1, 2), Fraction(3, 4), Fraction(1, 48)]) == 48
    assert cost_scale([Fraction(6), Fraction(4)]) == Fraction(1, 2)


def test_no_money_at_all_scales_by_one() -> None:
    """A network without any cost has no divisor."""
    assert cost_scale([Fraction(0), Fraction(0)]) == 1
    assert common_grid([]) == 0


def test_columns_with_several_units_lie_on_one_grid() -> None:
    """3 pallets of 48 and 10 units, in steps of 1/7: 1,008 and 70 of them."""
    column = Rationals(
        values=np.array([3, 10]),
        codes=np.array([1, 0], np.int32),
        multipliers=(Fraction(1), Fraction(48)),
    )

    assert column.grid() == 2
    assert column.on(Fraction(1, 7)).tolist() == [1008, 70]
    assert [column.fraction(row) for row in (0, 1)] == [144, 10]


def test_values_beyond_64_bits_stay_exact() -> None:
    """2**61 at a millionth each, on a grid of a billionth, leave int64 and lose nothing."""
    column = Rationals.of(np.array([2**61, 1]), Fraction(1, 10**6))

    assert column.on(Fraction(1, 10**9)).tolist() == [2**61 * 1000, 1000]


def test_rounding_goes_down_or_up_and_names_what_is_too_large() -> None:
    """10.5 in steps of 4 is 2 or 3; 2**61 of 4 each are more than 2**62."""
    column = Rationals.of(np.array([105]), Fraction(1, 40))

    assert column.rounded(up=False, what="x").tolist() == [2]
    assert column.rounded(up=True, what="x").tolist() == [3]
    with pytest.raises(NumbersTooLargeError, match="capacity of a lane"):
        Rationals.of(np.array([2**61]), Fraction(4)).rounded(up=False, what="capacity of a lane")


def test_divisor_looks_at_every_value() -> None:
    """The one value that 6 does not divide stands last, behind what is sampled."""
    values = np.append(np.full(5000, 12), [0, 9])

    assert common_divisor(values) == 3
    assert common_divisor(np.zeros(3000, np.int64)) == 0
    assert common_divisor(np.array([2**70, 2**65], object)) == 2**65
