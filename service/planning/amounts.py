"""Steps and scaled money turned into the exact texts of a plan."""

from dataclasses import dataclass
from fractions import Fraction

from service.network.columns import Item
from service.network.quantities import exact_text

UNKNOWN = "unknown"


def text(value: Fraction | int) -> str:
    """Return the exact text of an amount."""
    return exact_text(Fraction(value))


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
