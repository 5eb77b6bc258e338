"""Freight tariffs of a network: what they say, and which of them holds on which day."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Final

from service.network.columns import Item
from service.network.money import MEASURE_OF
from service.network.quantities import parse_exact
from service.network.units import per_unit

CHARGEABLE: Final = "chargeable_weight"


@dataclass(frozen=True, slots=True, kw_only=True)
class Break:
    """From this quantity on the rate is ``rate``: money per unit of the tariff's measure."""

    start: Fraction
    rate: Fraction


@dataclass(frozen=True, slots=True, kw_only=True)
class Tariff:
    """How a carrier charges one shipment: all goods on one lane on one departure.

    ``measure`` is ``unit``, ``weight_kg``, ``volume_m3``, a pack, or ``chargeable_weight``, which
    is the greater of the weight and ``kg_per_m3`` times the volume. ``breaks`` ascend from 0.
    ``all_units``: the rate of the break that is reached holds for everything, else for what lies
    between two breaks. Amounts are in ``currency`` (None: the plan's); dates are inclusive.
    """

    id: str
    version: str | None
    source: str | None
    carrier: str | None
    currency: str | None
    valid_from: str | None
    valid_until: str | None
    measure: str
    kg_per_m3: Fraction | None
    breaks: tuple[Break, ...]
    all_units: bool
    pay_up: bool
    minimum_charge: Fraction
    surcharge_percent: Fraction
    round_up_to: Fraction | None
    round_money: Fraction | None

    def holds_on(self, day: str) -> bool:
        """Return whether the tariff is valid on a day, an ISO date."""
        after = self.valid_from is None or self.valid_from <= day
        return after and (self.valid_until is None or day <= self.valid_until)

    def measured(self, goods: Sequence[tuple[Item, Fraction]]) -> Fraction | None:
        """Return how much of the measure some goods are; None where an item does not say."""
        if self.measure != CHARGEABLE:
            return _total(goods, self.measure)
        weight, volume = _total(goods, "weight_kg"), _total(goods, "volume_m3")
        if weight is None or volume is None or self.kg_per_m3 is None:
            return None
        return max(weight, volume * self.kg_per_m3)


def tariffs_of(head: Mapping[str, Any]) -> list[Tariff]:
    """Return the tariffs of a network's head, in their order."""
    return [tariff_of(document) for document in head.get("tariffs", ())]


def tariffs_on(head: Mapping[str, Any], day: str) -> dict[str, Tariff]:
    """Return the tariffs that hold on ``day`` by id; of one id at most one does."""
    return {tariff.id: tariff for tariff in tariffs_of(head) if tariff.holds_on(day)}


def departure_day(head: Mapping[str, Any]) -> str:
    """Return the day on which goods leave: without dates, the local date of the cut-off."""
    return str(head["cut_off"])[:10]


def tariff_of(document: Mapping[str, Any]) -> Tariff:
    """Return one tariff from its normal form."""

    def number(name: str, absent: str | None) -> Fraction | None:
        text = document.get(name, absent)
        return None if text is None else parse_exact(text)

    basis = document["basis"]
    return Tariff(
        id=document["id"],
        version=document.get("version"),
        source=document.get("source"),
        carrier=document.get("carrier"),
        currency=document.get("currency"),
        valid_from=document.get("valid_from"),
        valid_until=document.get("valid_until"),
        measure=MEASURE_OF.get(basis, basis),
        kg_per_m3=number("kg_per_m3", None),
        breaks=tuple(
            Break(start=parse_exact(one["from"]), rate=parse_exact(one["rate"]))
            for one in document["breaks"]
        ),
        all_units=document.get("break_type") == "all_units",
        pay_up=document.get("pay_up", False),
        minimum_charge=number("minimum_charge", "0") or Fraction(0),
        surcharge_percent=number("surcharge_percent", "0") or Fraction(0),
        round_up_to=number("round_up_to", None),
        round_money=number("round_money", None),
    )


def _total(goods: Sequence[tuple[Item, Fraction]], measure: str) -> Fraction | None:
    """Return the sum of a measure, None where an item does not say."""
    total = Fraction(0)
    for item, quantity in goods:
        amount = per_unit(item, measure)
        if amount is None:
            return None
        total += quantity * amount
    return total
