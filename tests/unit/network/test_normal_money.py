"""Money in a stored head: decimals in their one spelling, as every reader of it expects."""

from fractions import Fraction

import pytest

from service.network.column_bytes import NormalFormError
from service.network.normal_money import check_exchange_rates
from service.network.normal_tariffs import check_tariffs
from service.network.normal_values import decimal_of

ODD = ["1/3", "4/2", "1.50", "01", "-0", "1e3", "+1", "", " 1", "NaN", None, 1, 0.5]


@pytest.mark.parametrize("text", ["0", "1.71", "-3", "1000000000000.000001"])
def test_a_decimal_is_read(text: str) -> None:
    """Its spelling is the shortest one."""
    assert decimal_of(text) == Fraction(text)


@pytest.mark.parametrize("text", ODD)
def test_what_is_no_decimal_is_refused(text: object) -> None:
    """A fraction too: it is exact, but no reader of a tariff or a rate expects one."""
    with pytest.raises(NormalFormError):
        decimal_of(text)


@pytest.mark.parametrize("text", ODD)
def test_rates_of_tariffs_and_exchange_are_decimals(text: object) -> None:
    """Wherever they stand."""
    tariff = {"id": "T", "basis": "unit", "breaks": [{"from": "0", "rate": text}]}
    with pytest.raises(NormalFormError):
        check_tariffs({"currency": "EUR", "tariffs": [tariff]})
    with pytest.raises(NormalFormError):
        check_exchange_rates(
            {"currency": "EUR", "exchange_rates": [{"currency": "NOK", "rate": text}]}
        )


def test_right_ones_pass() -> None:
    """So that the refusals above are about the number."""
    tariff = {"id": "T", "basis": "unit", "breaks": [{"from": "0", "rate": "1.71"}]}
    check_tariffs({"currency": "EUR", "tariffs": [tariff]})
    check_exchange_rates(
        {"currency": "EUR", "exchange_rates": [{"currency": "NOK", "rate": "8.73"}]}
    )
