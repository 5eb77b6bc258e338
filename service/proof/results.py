"""What the flow of one item comes to: quantities, money and shortage, for the documents' checks."""

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from service.network.columns import IntArray, Network
from service.network.units import per_unit
from service.proof.arc_build import NO_MONEY, Arc
from service.proof.arcs import ItemArcs
from service.proof.exact import Whole
from service.proof.groups import Wanted
from service.proof.money import is_plain, unit_costs
from service.proof.numbers import Numbers, numbers_of
from service.proof.stock import Stock
from service.proof.tariff_lanes import freights_of


@dataclass(frozen=True, slots=True, kw_only=True)
class ItemResult:
    """A checked item. Quantities are in steps, by row of a lane, site, tier or group.

    ``money`` are the parts of landed cost, shortage and lateness; ``short_by_priority`` has every
    priority that occurs, ascending; ``late`` is the weighted lateness in steps and days (None:
    nothing could weigh). ``drawn_on`` is by site and date, ``late_days`` by group.
    """

    item: int
    step: Fraction
    stock: Mapping[int, Stock]
    wanted: Wanted
    on_lane: Mapping[int, int]
    drawn: Mapping[tuple[int, int], int]
    kept: Mapping[int, int]
    served: Mapping[tuple[int, str], int]
    keep_short: Mapping[int, int]
    money: Mapping[str, Fraction]
    short_by_priority: Mapping[int, int]
    late: int | None
    late_days: Mapping[tuple[int, str], int]
    drawn_on: Mapping[tuple[int, object], int]


def item_result(network: Network, arcs: ItemArcs, flow: Whole) -> ItemResult:
    """Return what ``flow`` (in steps, lanes first) comes to."""
    lanes = len(arcs.rows)
    moved = np.flatnonzero(flow[:lanes] != 0)
    on_lane = dict(zip(arcs.rows[moved].tolist(), flow[moved].tolist(), strict=True))
    drawn: dict[tuple[int, int], int] = {}
    kept: dict[int, int] = {}
    served: dict[tuple[int, str], int] = {}
    keep_short: dict[int, int] = {}
    money = dict.fromkeys(_MONEY, Fraction(0)) | _lane_money(network, arcs, on_lane)
    drawn_on: dict[tuple[int, object], int] = {}
    paid: dict[str, list[tuple[int, Fraction]]] = {part: [] for part in money}
    short = dict.fromkeys(arcs.priorities, 0)
    for arc, steps in zip(arcs.arcs, flow[lanes:].tolist(), strict=True):
        if not steps:
            continue
        kind = arc.kind
        if arc.money is not NO_MONEY:
            paid[_PARTS[kind]].append((steps, arc.money))
        if arc.rank:
            short[arcs.priorities[arc.rank - 1]] += steps
        if kind == "serve":
            group = (_site(arc), str(arc.key[1]))
            served[group] = served.get(group, 0) + steps
        elif kind == "draw":
            tier = (_site(arc), int(str(arc.key[1])))
            drawn[tier] = drawn.get(tier, 0) + steps
            spot = (_site(arc), arc.key[2] if len(arc.key) > 2 else None)
            drawn_on[spot] = drawn_on.get(spot, 0) + steps
        elif kind == "keep":
            kept[_site(arc)] = kept.get(_site(arc), 0) + steps
        elif kind == "short" and arc.key[1] is None:
            keep_short[_site(arc)] = steps
    for part, amounts in paid.items():
        rates = numbers_of(rate for _, rate in amounts)
        whole = sum(steps * rate for (steps, _), rate in zip(amounts, rates.whole, strict=True))
        money[part] += Fraction(whole, rates.below)
    late_days = _late_days(arcs, flow, money)
    return ItemResult(
        item=arcs.item,
        step=arcs.step,
        stock=arcs.stock,
        wanted=arcs.wanted,
        on_lane=on_lane,
        drawn=drawn,
        kept=kept,
        served=served,
        keep_short=keep_short,
        money=money,
        short_by_priority=short,
        late=_weighed(arcs, flow),
        late_days=late_days,
        drawn_on=drawn_on,
    )


def _lane_money(
    network: Network, arcs: ItemArcs, on_lane: Mapping[int, int]
) -> dict[str, Fraction]:
    """Return transport and charges of all that moves."""
    rows = np.array(list(on_lane), dtype=np.int64)
    money = {}
    for part, costs in lane_costs(network, rows, arcs.item).items():
        carried = sum(map(int.__mul__, on_lane.values(), costs.whole))
        money[part] = carried * arcs.step / costs.below
    freights = freights_of(network)
    if freights is not None:
        for row, steps in on_lane.items():
            if freights.tariff(row) is not None:
                money["transport"] += freights.money(row, arcs.item, steps)
    return money


_MONEY = ("supply", "handling", "transport", "charges", "shortage", "lateness")


def _late_days(
    arcs: ItemArcs, flow: Whole, money: dict[str, Fraction]
) -> dict[tuple[int, str], int]:
    """Return the steps and days that each group is late, and move what they cost to lateness.

    It is part of what arcs to groups cost, which counted as handling.
    """
    days: dict[tuple[int, str], int] = {}
    for position, late in arcs.late.items():
        steps, arc = int(flow[len(arcs.rows) + position]), arcs.arcs[position]
        group = (_site(arc), str(arc.key[1]))
        days[group] = days.get(group, 0) + steps * late.days
        money["handling"] -= steps * late.money
        money["lateness"] += steps * late.money
    return days


def _weighed(arcs: ItemArcs, flow: Whole) -> int | None:
    """Return the lateness that weighs, in steps and days and weights; None if none could."""
    if not any(late.weight for late in arcs.late.values()):
        return None
    first = len(arcs.rows)
    return sum(int(flow[first + at]) * late.weight for at, late in arcs.late.items())


_PARTS: Mapping[str, str] = {
    "draw": "supply",
    "handle": "handling",
    "serve": "handling",
    "pass": "handling",
    "short": "shortage",
}


def lane_costs(network: Network, rows: IntArray, item: int) -> dict[str, Numbers]:
    """Return ``transport`` and ``charges`` of one unit of ``item`` on the lanes ``rows``."""
    if is_plain(network):
        nothing = Numbers(whole=[0] * len(rows), below=1)
        return {"transport": _rates(network, rows, item), "charges": nothing}
    transport, charges = unit_costs(network, rows, item)
    return {"transport": transport, "charges": charges}


def _rates(network: Network, rows: IntArray, item: int) -> Numbers:
    """Return the money that one unit of ``item`` costs on lanes that have a rate alone."""
    lanes = network.lanes
    codes = lanes.measure.codes[rows].tolist()
    per = {
        code: per_unit(network.items[item], lanes.measure.values[code])
        for code in set(codes)
        if code >= 0
    }
    known = {code: amount for code, amount in per.items() if amount is not None}
    if not lanes.unit_cost.present[rows].all() or len(known) != len(set(codes)):
        raise ValueError(f"a lane has no cost for {network.items[item].id!r}")
    factors = numbers_of(known.values())
    factor = dict(zip(known, factors.whole, strict=True))
    costs = lanes.unit_cost.values[rows].tolist()
    return Numbers(
        whole=[cost * factor[code] for cost, code in zip(costs, codes, strict=True)],
        below=factors.below * 10**lanes.unit_cost.exponent,
    )


def lane_ends(network: Network, rows: IntArray) -> dict[int, tuple[int, int]]:
    """Return origin and destination of each of the lanes ``rows``, by row."""
    lanes = network.lanes
    ends = zip(lanes.origin[rows].tolist(), lanes.destination[rows].tolist(), strict=True)
    return dict(zip(rows.tolist(), ends, strict=True))


def _site(arc: Arc) -> int:
    """Return the site that an arc's key begins with."""
    return int(str(arc.key[0]))
