"""What a shipment costs by a tariff, worked out by the proof itself from the network's head."""

from collections.abc import Mapping, Sequence
from fractions import Fraction
from itertools import pairwise
from math import ceil, floor
from typing import Any, NamedTuple

from service.network.columns import Item
from service.network.units import per_unit
from service.proof.rulings import UnusableNetworkError

Document = Mapping[str, Any]

_MEASURES = {"weight": "weight_kg", "volume": "volume_m3"}
_NOTHING = Fraction(0)


class Bill(NamedTuple):
    """The freight of a shipment in its tariff's currency, and what it is made of.

    ``parts`` are (from, quantity, rate).
    """

    measured: Fraction
    charged: Fraction
    parts: tuple[tuple[Fraction, Fraction, Fraction], ...]
    amount: Fraction


def measure_of_goods(tariff: Document, goods: Sequence[tuple[Item, Fraction]]) -> Fraction:
    """Return how much of the tariff's basis goods are; raise ``UnusableNetworkError`` if unknown.

    Chargeable weight is the weight, or the volume at so many kilograms a cubic metre if more.
    """

    def total(measure: str) -> Fraction:
        found = _NOTHING
        for item, quantity in goods:
            of_unit = per_unit(item, measure)
            if of_unit is None:
                raise UnusableNetworkError(f"{item.id!r} cannot be charged by {tariff['id']!r}")
            found += of_unit * quantity
        return found

    if tariff["basis"] == "chargeable_weight":
        return max(total("weight_kg"), total("volume_m3") * Fraction(tariff["kg_per_m3"]))
    basis: str = tariff["basis"]
    return total(_MEASURES.get(basis, basis))


def bill(tariff: Document, measured: Fraction) -> Bill:
    """Return what a shipment of ``measured`` costs, its rounding included."""
    if not measured:
        return Bill(_NOTHING, _NOTHING, (), _NOTHING)
    grid = Fraction(tariff.get("round_up_to", "0"))
    quantity = ceil(measured / grid) * grid if grid else measured
    parts = _parts(tariff, quantity)
    amount = _due(tariff, sum((each * rate for _, each, rate in parts), _NOTHING))
    cent = Fraction(tariff.get("round_money", "0"))
    if cent:
        amount = floor((2 * amount + cent) / (2 * cent)) * cent
    return Bill(measured, sum((each for _, each, _ in parts), _NOTHING), parts, amount)


def rises(tariff: Document, of_step: Fraction) -> bool:
    """Return whether no further step of one item ever costs less than the one before.

    What lies between two turns of the tariff is straight, so that it is enough to look at the
    steps around each turn; roundings must leave all of them as they are.
    """
    if not of_step:
        return True
    grid = Fraction(tariff.get("round_up_to", "0"))
    if grid and (of_step / grid).denominator != 1:
        return False
    near = {0, 1}
    for turn in _turns(tariff):
        # At a turn itself the freight can jump.
        near |= {floor(turn / of_step) + by for by in (-1, 0, 1)}
    counts = sorted({count + by for count in near for by in (-1, 0, 1, 2) if count + by >= 0})
    exact = {count: _exact(tariff, count * of_step) for count in counts}
    cent = Fraction(tariff.get("round_money", "0"))
    if cent and any((amount / cent).denominator != 1 for amount in exact.values()):
        return False
    return all(
        exact[count + 1] - exact[count] >= exact[count] - exact[count - 1]
        for count in near
        if count > 0
    )


def last_turn(tariff: Document) -> Fraction:
    """Return from where on each further unit of the measure costs the same."""
    return max(_turns(tariff), default=_NOTHING)


def is_even(tariff: Document) -> bool:
    """Return whether every unit of the measure costs the same whatever else is shipped."""
    bent = {"minimum_charge", "round_up_to", "round_money"} & set(tariff)
    return not bent and len({one["rate"] for one in tariff["breaks"]}) == 1


def _breaks(tariff: Document) -> list[tuple[Fraction, Fraction]]:
    """Return (from, rate) of each break."""
    return [(Fraction(one["from"]), Fraction(one["rate"])) for one in tariff["breaks"]]


def _parts(tariff: Document, quantity: Fraction) -> tuple[tuple[Fraction, Fraction, Fraction], ...]:
    """Return what is charged at which rate."""
    breaks = _breaks(tariff)
    reached = max(start for start, _ in breaks if start <= quantity)
    if tariff.get("break_type") != "all_units":
        ends = [*(start for start, _ in breaks[1:]), None]
        return tuple(
            (start, (quantity if end is None else min(end, quantity)) - start, rate)
            for (start, rate), end in zip(breaks, ends, strict=True)
            if start < quantity
        )
    offers = {start: (max(start, quantity), rate) for start, rate in breaks}
    chosen = reached
    if tariff.get("pay_up"):
        least = min(each * rate for each, rate in offers.values())
        if offers[reached][0] * offers[reached][1] > least:
            chosen = next(at for at, (each, rate) in offers.items() if each * rate == least)
    return ((chosen, *offers[chosen]),)


def _due(tariff: Document, base: Fraction) -> Fraction:
    """Return a sum with minimum and surcharge."""
    least = Fraction(tariff.get("minimum_charge", "0"))
    return max(base, least) * (100 + Fraction(tariff.get("surcharge_percent", "0"))) / 100


def _exact(tariff: Document, measured: Fraction) -> Fraction:
    """Return the freight without roundings, as a sum of what changes at each break."""
    if not measured:
        return _NOTHING
    breaks = _breaks(tariff)
    if tariff.get("break_type") != "all_units":
        base, former = _NOTHING, _NOTHING
        for start, rate in breaks:
            base += (rate - former) * max(_NOTHING, measured - start)
            former = rate
    elif tariff.get("pay_up"):
        base = min(rate * max(measured, start) for start, rate in breaks)
    else:
        base = measured * [rate for start, rate in breaks if start <= measured][-1]
    return _due(tariff, base)


def _turns(tariff: Document) -> set[Fraction]:
    """Return every measure at which the freight, without roundings, can turn or jump."""
    breaks = _breaks(tariff)
    turns = {start for start, _ in breaks}
    least = Fraction(tariff.get("minimum_charge", "0"))
    base = _NOTHING
    for (start, rate), (end, _) in pairwise([*breaks, (breaks[-1][0], _NOTHING)]):
        if rate:
            # Where the rate alone, or what is due at the break and the rate, reach the minimum.
            turns |= {least / rate, start + (least - base) / rate}
            if tariff.get("pay_up"):
                turns |= {other * dear / rate for other, dear in breaks}
        base += rate * (end - start)
    return {turn for turn in turns if turn > 0}
