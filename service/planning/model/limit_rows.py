"""The rows of shared limits, built from rules and lanes, but for those that nothing could break.

What lanes carry counts in the measure of a limit and, for what passes a site, what is drawn there.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from scipy.sparse import coo_array, csr_array

from service.network.columns import BoolArray, IntArray, Network
from service.network.rules import SharedCapacity, Throughput
from service.network.units import per_unit
from service.planning.model.arcs import SAFE, UNLIMITED, Kind
from service.planning.model.item_network import ItemNetwork
from service.planning.model.limits import NumbersTooLargeError
from service.planning.model.rule_book import Entry, RuleBook
from service.planning.model.scaling import common_grid
from service.planning.model.shared_limits import (
    NO_LEAST,
    NO_MOST,
    Coefficients,
    LimitName,
    SharedLimits,
)


@dataclass(slots=True)
class _Family:
    """Rows of one rule, or of lanes with one measure: their keys, limits and entries so far."""

    kind: str
    measure: str
    grain: Fraction
    names: list[LimitName]
    lower: IntArray
    upper: IntArray
    entries: list[tuple[int, IntArray, IntArray, IntArray]]


def shared_limits(
    network: Network, items: Sequence[ItemNetwork], book: RuleBook
) -> SharedLimits | None:
    """Return the rows that some flow within the limits of the arcs would break; None: no row."""
    families = [*_lane_families(network, items), *_rule_families(network, items, book)]
    built = [made for made in (_needed(family, items) for family in families) if made is not None]
    if not built:
        return None
    return SharedLimits(
        names=tuple(name for family, _ in built for name in family.names),
        kinds=tuple(family.kind for family, _ in built for _ in family.names),
        measures=tuple(family.measure for family, _ in built for _ in family.names),
        grain=tuple(family.grain for family, _ in built for _ in family.names),
        lower=np.concatenate([family.lower for family, _ in built]),
        upper=np.concatenate([family.upper for family, _ in built]),
        of_item=tuple(
            csr_array(_stacked([matrices[item] for _, matrices in built]))
            for item in range(len(items))
        ),
    )


def _stacked(matrices: list[Coefficients]) -> Any:  # noqa: ANN401 - what SciPy makes of them
    """Return matrices one below the other."""
    rows = np.cumsum([0] + [matrix.shape[0] for matrix in matrices])
    parts = [matrix.tocoo() for matrix in matrices]
    return coo_array(
        (
            np.concatenate([part.data for part in parts]),
            (
                np.concatenate(
                    [part.coords[0] + start for part, start in zip(parts, rows, strict=False)]
                ),
                np.concatenate([part.coords[1] for part in parts]),
            ),
        ),
        shape=(int(rows[-1]), matrices[0].shape[1]),
    )


def amounts_in(network: Network, measure: str, picked: BoolArray) -> dict[int, Fraction]:
    """Return how much of a measure one step is, of each picked item that has any of it."""
    amounts = {}
    for item in np.flatnonzero(picked).tolist():
        amount = per_unit(network.items[item], measure)
        if amount:
            amounts[item] = amount * network.items[item].step
    return amounts


def _lane_families(network: Network, items: Sequence[ItemNetwork]) -> Iterator[_Family]:
    """Yield the limits that lanes state for all their items together, a family for a measure."""
    lanes = network.lanes
    if "together" not in lanes.per.values:
        return
    shared = (lanes.per.codes == lanes.per.values.index("together")) & (lanes.item < 0)
    shared &= lanes.capacity.present | lanes.must_ship.present
    for code, measure in enumerate(lanes.measure.values):
        rows = np.flatnonzero(shared & (lanes.measure.codes == code))
        amounts = amounts_in(network, measure, np.ones(len(network.items), np.bool_))
        if not rows.shape[0] or not amounts:
            continue
        grain = common_grid(amounts.values())
        key_of_lane = np.full(len(lanes), -1, np.int64)
        key_of_lane[rows] = np.arange(rows.shape[0])
        upper = _whole(lanes.capacity.values[rows], lanes.capacity.exponent, grain, up=False)
        lower = _whole(lanes.must_ship.values[rows], lanes.must_ship.exponent, grain, up=True)
        yield _Family(
            kind="lane",
            measure=measure,
            grain=grain,
            names=[LimitName(rule=None, lane=row) for row in rows.tolist()],
            lower=np.where(lower > 0, lower, NO_LEAST),
            upper=np.where(lanes.capacity.present[rows], upper, NO_MOST),
            entries=_on_lanes(items, amounts, grain, key_of_lane),
        )


def _rule_families(
    network: Network, items: Sequence[ItemNetwork], book: RuleBook
) -> Iterator[_Family]:
    """Yield the limits of the rules that items may share."""
    for entry in book.entries:
        rule = entry.rule
        if not isinstance(rule, SharedCapacity | Throughput):
            continue
        amounts = amounts_in(network, rule.measure, entry.items)
        if not amounts:
            continue
        grain = common_grid(amounts.values())
        most = _floor(rule.maximum / grain)
        if isinstance(rule, SharedCapacity):
            things = np.flatnonzero(entry.lanes)
            key, names = _keys(rule, things, len(network.lanes), "lane")
            entries = _on_lanes(items, amounts, grain, key)
        else:
            things = np.flatnonzero(entry.sites)
            key, names = _keys(rule, things, len(network.sites), "site")
            ends = network.lanes.origin if rule.flow == "sent" else network.lanes.destination
            entries = _on_lanes(items, amounts, grain, key[ends])
            if rule.flow == "through":
                entries += _on_draws(items, amounts, grain, key)
        family = _Family(
            kind=rule.name,
            measure=rule.measure,
            grain=grain,
            names=names,
            lower=np.full(len(names), NO_LEAST, np.int64),
            upper=np.full(len(names), most, np.int64),
            entries=entries,
        )
        yield _without_arc_limits(family, entry, items) if isinstance(rule, Throughput) else family


def _keys(
    rule: SharedCapacity | Throughput, things: IntArray, count: int, what: str
) -> tuple[IntArray, list[LimitName]]:
    """Return which row each lane or site counts to (-1: none), and the names of the rows."""
    key = np.full(count, -1, np.int64)
    if rule.per == "together":
        key[things] = 0
        return key, [LimitName(rule=rule.id)]
    key[things] = np.arange(things.shape[0])
    if what == "lane":
        return key, [LimitName(rule=rule.id, lane=thing) for thing in things.tolist()]
    flow = rule.flow if isinstance(rule, Throughput) else None
    return key, [LimitName(rule=rule.id, site=thing, flow=flow) for thing in things.tolist()]


def _on_lanes(
    items: Sequence[ItemNetwork], amounts: dict[int, Fraction], grain: Fraction, key: IntArray
) -> list[tuple[int, IntArray, IntArray, IntArray]]:
    """Return (item, rows, arcs, whole numbers) of open lanes; ``key`` is by row of the network."""
    entries = []
    for own in items:
        if own.item not in amounts:
            continue
        keys = key[own.lanes.rows]
        arcs = np.flatnonzero((keys >= 0) & ~own.lanes.closed)
        entries.append((own.item, keys[arcs], arcs, _filled(arcs, amounts[own.item] / grain)))
    return entries


def _on_draws(
    items: Sequence[ItemNetwork], amounts: dict[int, Fraction], grain: Fraction, key: IntArray
) -> list[tuple[int, IntArray, IntArray, IntArray]]:
    """Return (item, rows, arcs, whole numbers) of stock that is drawn; ``key`` is by site."""
    entries = []
    for own in items:
        if own.item not in amounts:
            continue
        shelved = own.layout.stock >= 0
        supply, draw = own.of_kind(Kind.SUPPLY), own.of_kind(Kind.DRAW)
        # Stock that may be kept is drawn where it leaves the shelf.
        arcs = np.concatenate((supply[~shelved[own.subject[supply]]], draw))
        keys = key[own.stock.site[own.subject[arcs]]]
        arcs, keys = arcs[keys >= 0], keys[keys >= 0]
        entries.append((own.item, keys, arcs, _filled(arcs, amounts[own.item] / grain)))
    return entries


def _without_arc_limits(family: _Family, entry: Entry, items: Sequence[ItemNetwork]) -> _Family:
    """Leave out what an arc of the one item that can pass a site already limits."""
    rule = entry.rule
    if not isinstance(rule, Throughput) or rule.per == "together":
        # One site that one item passes is the only case in which an arc would do: not worth it.
        return family
    users = np.zeros(len(family.names), np.int64)
    last = np.full(len(family.names), -1, np.int64)
    for item, rows, _, _ in family.entries:
        present = np.bincount(rows, minlength=len(family.names)) > 0
        users += present & (last != item)
        last[present] = item
    for row in np.flatnonzero(users == 1).tolist():
        layout, site = items[int(last[row])].layout, family.names[row].site
        assert site is not None  # noqa: S101 - rows of a throughput rule for each site
        if not layout.apart[site] or (rule.flow == "sent" and not layout.passes_on[site]):
            family.upper[row] = NO_MOST
    return family


def _needed(
    family: _Family, items: Sequence[ItemNetwork]
) -> tuple[_Family, list[Coefficients]] | None:
    """Return the family with only the rows that some flow would break, and their numbers."""
    rows = len(family.names)
    matrices = []
    highest, lowest = np.zeros(rows), np.zeros(rows)
    open_ended = np.zeros(rows, np.bool_)
    used = np.zeros(rows, np.bool_)
    for own in items:
        parts = [part for part in family.entries if part[0] == own.item]
        at, arcs, numbers = (
            np.concatenate([np.zeros(0, np.int64), *(part[column] for part in parts)])
            for column in (1, 2, 3)
        )
        matrices.append(csr_array((numbers, (at, arcs)), shape=(rows, len(own.arcs))))
        capacity = own.arcs.capacity[arcs]
        used[at] = True
        open_ended[at[capacity == UNLIMITED]] = True
        # Floats decide only whether a row is looked at; one too many changes nothing.
        np.add.at(highest, at, numbers.astype(np.float64) * capacity)
        np.add.at(lowest, at, numbers.astype(np.float64) * own.arcs.minimum[arcs])
    near = 1 - 2.0**-40
    above = (family.upper != NO_MOST) & (open_ended | (highest > family.upper * near))
    below = (family.lower != NO_LEAST) & (lowest < family.lower)
    kept = np.flatnonzero(used & (above | below))
    if not kept.shape[0]:
        return None
    family.names = [family.names[row] for row in kept.tolist()]
    family.lower, family.upper = family.lower[kept], family.upper[kept]
    return family, [csr_array(matrix[kept]) for matrix in matrices]


def _filled(arcs: IntArray, number: Fraction) -> IntArray:
    """Return one whole number for each arc."""
    if number.numerator >= SAFE:
        raise NumbersTooLargeError("What a step counts towards a shared limit reaches 2^62.")
    return np.full(arcs.shape[0], number.numerator, np.int64)


def _floor(value: Fraction) -> int:
    """Return the whole number below."""
    found = value.numerator // value.denominator
    if found >= SAFE:
        raise NumbersTooLargeError("A shared limit is 2^62 of its least parts or more.")
    return found


def _whole(values: IntArray, exponent: int, grain: Fraction, *, up: bool) -> IntArray:
    """Return decimals in grains, rounded down or up to whole numbers."""
    per_grain = grain * 10**exponent
    above, below = per_grain.denominator, per_grain.numerator
    whole = values.astype(object) * above
    rounded: Any = -(-whole // below) if up else whole // below
    if any(number >= SAFE for number in rounded.tolist()):
        raise NumbersTooLargeError("A shared limit is 2^62 of its least parts or more.")
    whole_numbers: IntArray = rounded.astype(np.int64)
    return whole_numbers
