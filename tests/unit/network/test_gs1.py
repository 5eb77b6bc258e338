"""Check digits of GS1 keys, against published keys and an independent library."""

import pytest
from hypothesis import given
from hypothesis import strategies as st
from stdnum import ean

from service.network.gs1 import check_digit, is_gln, is_gtin

DIGITS = st.text(alphabet="0123456789", min_size=7, max_size=13)


@pytest.mark.parametrize(
    ("key", "source"),
    [
        ("6291041500213", "check-digit page of GS1 Hong Kong: sum 57, digit 3"),
        ("73513537", "documentation of stdnum.ean, python-stdnum 2.2"),
        ("9780471117094", "documentation of stdnum.ean, python-stdnum 2.2"),
        ("98412345678908", "documentation of stdnum.ean, python-stdnum 2.2"),
        ("036000291452", "GTIN-12: 3(0+6+0+2+1+5)+(3+0+0+9+4)=58, digit 2, by hand"),
    ],
)
def test_published_keys_are_accepted(key: str, source: str) -> None:
    """The sum is the one that GS1 prints."""
    assert is_gtin(key), source


@pytest.mark.parametrize(
    ("key", "why"),
    [
        ("6291041500214", "wrong check digit"),
        ("6921041500213", "neighbours 2 and 9 swapped"),
        ("629104150021", "12 digits whose last is not their check digit"),
        ("629104150021X", "a letter"),
        ("6291041500213 ", "a space"),
        ("\u0666291041500213", "a digit that is not ASCII"),
        ("", "nothing"),
        ("123456789", "nine digits"),
    ],
)
def test_broken_keys_are_refused(key: str, why: str) -> None:
    """A wrong digit in a master record sends goods astray."""
    assert not is_gtin(key), why


def test_a_gln_has_thirteen_digits() -> None:
    """A GLN has the check digit of a GTIN-13 and no other length."""
    assert is_gln("6291041500213")
    assert not is_gln("73513537")


@given(DIGITS)
def test_check_digits_agree_with_an_independent_library(body: str) -> None:
    """python-stdnum computes the same digit for every length."""
    assert str(check_digit(body)) == ean.calc_check_digit(body)
    assert is_gtin(body + str(check_digit(body))) == (len(body) + 1 in (8, 12, 13, 14))
