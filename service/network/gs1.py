"""GS1 identification keys: the check digit of GTIN-8, GTIN-12, GTIN-13, GTIN-14 and GLN.

GS1 General Specifications, "check digit calculations": from the right, the check digit left out,
digits weigh 3, 1, 3, 1 and so on; the check digit fills the sum up to a multiple of ten. It finds
every wrong digit but not every swap of neighbours (0 and 5, 1 and 6, ... stay unseen).
"""

from typing import Final

GTIN_LENGTHS: Final = (8, 12, 13, 14)
GLN_LENGTH: Final = 13


def check_digit(body: str) -> int:
    """Return the check digit that belongs behind ``body``, a text of ASCII digits."""
    weighted = (int(digit) * (3, 1)[place % 2] for place, digit in enumerate(reversed(body)))
    return -sum(weighted) % 10


def is_gtin(text: str) -> bool:
    """Return whether ``text`` is a GTIN of one of the four lengths with the right check digit."""
    return len(text) in GTIN_LENGTHS and _agrees(text)


def is_gln(text: str) -> bool:
    """Return whether ``text`` is a GLN: 13 digits, the last of them the right check digit."""
    return len(text) == GLN_LENGTH and _agrees(text)


def _agrees(text: str) -> bool:
    """Return whether ``text`` is all ASCII digits and ends with the check digit of the others."""
    return text.isascii() and text.isdigit() and check_digit(text[:-1]) == int(text[-1])
