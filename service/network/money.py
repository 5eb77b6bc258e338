"""Money in several currencies, and charges on lanes: what the head and the columns mean by them.

An exchange rate says what ``per`` units of a currency are in the currency of the plan. Amounts are
exact rationals throughout; nothing is rounded before the total of the plan.
"""

import json
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Final

from service.network.columns import Item
from service.network.quantities import parse_exact
from service.network.units import per_unit

# What the bases of charges and tariffs are called in a network's measures; others are packs.
MEASURE_OF: Final[Mapping[str, str]] = {"weight": "weight_kg", "volume": "volume_m3"}
VALUE: Final = "value"


@dataclass(frozen=True, slots=True, kw_only=True)
class ExchangeRate:
    """``per`` units of ``currency`` are ``rate`` of the plan's, as ``source`` said ``as_of``."""

    currency: str
    rate: Fraction
    per: Fraction
    as_of: str | None
    source: str | None

    @property
    def of_one(self) -> Fraction:
        """Return what one unit of the currency is in that of the plan."""
        return self.rate / self.per


@dataclass(frozen=True, slots=True, kw_only=True)
class Charge:
    """A charge on what goes over a lane, such as duty.

    ``rate`` is money of ``currency`` (None: the plan's) per unit of ``measure``; or, where
    ``percent`` is given, that part of the value of the goods. ``items`` are ids; None: every item.
    """

    name: str
    measure: str
    rate: Fraction | None
    percent: Fraction | None
    currency: str | None
    items: tuple[str, ...] | None

    def concerns(self, item: Item) -> bool:
        """Return whether the charge is due for ``item``."""
        return self.items is None or item.id in self.items

    def per_item_unit(self, item: Item) -> Fraction | None:
        """Return the money of its own currency for one unit of ``item``, None if not known."""
        if self.percent is not None:
            return None if item.value is None else item.value * self.percent / 100
        amount = per_unit(item, self.measure)
        return None if amount is None or self.rate is None else self.rate * amount


def exchange_rates(head: Mapping[str, Any]) -> dict[str, ExchangeRate]:
    """Return the exchange rates of a network's head by currency, in their order."""
    return {
        document["currency"]: ExchangeRate(
            currency=document["currency"],
            rate=parse_exact(document["rate"]),
            per=parse_exact(document.get("per", "1")),
            as_of=document.get("as_of"),
            source=document.get("source"),
        )
        for document in head.get("exchange_rates", ())
    }


def factors(head: Mapping[str, Any]) -> dict[str | None, Fraction]:
    """Return what one unit of each currency is in the plan's, which is also called None."""
    rates: dict[str | None, Fraction] = {
        code: rate.of_one for code, rate in exchange_rates(head).items()
    }
    return {None: Fraction(1), head.get("currency"): Fraction(1), **rates}


def charges_of(text: str) -> tuple[Charge, ...]:
    """Return the charges that a value of the column ``charges`` holds, in their order."""
    return tuple(
        Charge(
            name=document["name"],
            measure=MEASURE_OF.get(document["basis"], document["basis"]),
            rate=parse_exact(document["rate"]) if "rate" in document else None,
            percent=parse_exact(document["percent"]) if "percent" in document else None,
            currency=document.get("currency"),
            items=tuple(document["items"]) if "items" in document else None,
        )
        for document in json.loads(text)
    )


def charged(
    charges: tuple[Charge, ...], item: Item, worth: Mapping[str | None, Fraction]
) -> Fraction | None:
    """Return the plan's money that charges come to for one unit of ``item``, None if not known."""
    total = Fraction(0)
    for charge in charges:
        if not charge.concerns(item):
            continue
        amount = charge.per_item_unit(item)
        if amount is None or charge.currency not in worth:
            return None
        total += amount * worth[charge.currency]
    return total
