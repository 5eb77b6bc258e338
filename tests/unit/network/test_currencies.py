"""The table of ISO 4217, against published values and an independent library."""

import iso4217
import pytest

from service.network.currencies import is_currency, minor_units


@pytest.mark.parametrize(
    ("code", "decimals"),
    [
        ("EUR", 2),
        ("USD", 2),
        ("GBP", 2),
        ("CHF", 2),
        ("PLN", 2),
        ("JPY", 0),
        ("ISK", 0),
        ("BHD", 3),
    ],
)
def test_minor_units_are_those_of_iso_4217(code: str, decimals: int) -> None:
    """Source: ISO 4217 list one, as in PyPI iso4217 1.16.20260101 (not CLDR, which differs)."""
    assert minor_units(code) == decimals


def test_the_table_is_that_of_an_independent_library() -> None:
    """Every code, and the decimals of every code; a missing currency would refuse good networks."""
    theirs = {currency.code: currency.exponent for currency in iso4217.Currency}

    assert {code: minor_units(code) for code in theirs} == theirs
    assert all(is_currency(code) for code in theirs)


@pytest.mark.parametrize("code", ["", "eur", "EURO", "EU", "ABC", "978"])
def test_other_texts_are_no_currency(code: str) -> None:
    """Codes are three capital letters of the list, nothing like them."""
    assert not is_currency(code)
    assert minor_units(code) is None
