"""Steps and scaled money turned into the exact texts of a plan."""

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from service.network.columns import Item
from service.network.quantities import exact_text

# What is written as JSON.
Document = dict[str, Any]

UNKNOWN = "unknown"
# Units of rates and quantities have far fewer decimals; others are written one by one.
PLACES_MAX = 64


def text(value: Fraction | int) -> str:
    """Return the exact text of an amount."""
    return exact_text(Fraction(value))


def texts(numbers: Sequence[int], unit: Fraction) -> list[str]:
    """Return the exact texts of many numbers of one ``unit``, as ``text(number * unit)`` has them.

    A plan has ten amounts a line; one fraction each would take longer than the solve.
    """
    places = _places(unit.denominator)
    if places is None:
        return [exact_text(number * unit) for number in numbers]
    factor = unit.numerator * 10**places // unit.denominator
    if places == 0:
        return [str(number * factor) for number in numbers]
    return [_decimal(number * factor, places) for number in numbers]


def _places(denominator: int) -> int | None:
    """Return the decimals of 1/``denominator``, None where there is no end to them."""
    for places in range(PLACES_MAX):
        if 10**places % denominator == 0:
            return places
    return None


def _decimal(number: int, places: int) -> str:
    """Return ``number`` with its last ``places`` digits as decimals, zeros at the end left out."""
    if number == 0:
        return "0"
    digits = str(number) if number > 0 else str(-number)
    if len(digits) <= places:
        digits = digits.rjust(places + 1, "0")
    decimals = digits[-places:].rstrip("0")
    sign = "" if number > 0 else "-"
    return f"{sign}{digits[:-places]}.{decimals}" if decimals else sign + digits[:-places]


@dataclass(frozen=True, slots=True, kw_only=True)
class Measured:
    """A sum that is unknown as soon as one part of it is."""

    known: Fraction | None = Fraction(0)

    def plus(self, quantity: Fraction, per_unit: Fraction | None) -> "Measured":
        """Return the sum with ``quantity`` more, each of ``per_unit`` (None: not known)."""
        if self.known is None or per_unit is None:
            return Measured(known=None)
        return Measured(known=self.known + quantity * per_unit)

    @property
    def text(self) -> str:
        """Return the exact text, or ``unknown``."""
        return UNKNOWN if self.known is None else exact_text(self.known)


def pallets_per_unit(item: Item) -> Fraction | None:
    """Return how much of a pallet one unit is, None where the item has no pallet."""
    for pack in item.packs:
        if pack.unit == "pallet":
            return 1 / pack.contains
    return None
