"""What is wanted of one item: order lines, and the groups that need not be told apart."""

import json
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from service.network.columns import Network
from service.network.options import Options
from service.network.units import item_units
from service.proof.rulings import UnusableNetworkError

# Who names no importance has this priority.
PRIORITY_DEFAULT = 5


@dataclass(frozen=True, slots=True, kw_only=True)
class OrderLine:
    """One demand row in steps: ``wanted`` after rounding, its importance and its origins.

    ``priority`` is 0 where the line competes in money, ``shortage_cost`` per item unit; ``origins``
    are positions of sites, None where all may serve it. ``group`` is -1 where nothing is wanted.
    """

    row: int
    site: int
    wanted: int
    priority: int
    shortage_cost: Fraction | None
    origins: frozenset[int] | None
    group: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Group:
    """Order lines of one site with one importance and the same origins, wanted together."""

    label: str
    site: int
    wanted: int
    priority: int
    shortage_cost: Fraction | None
    origins: frozenset[int] | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Wanted:
    """All that is wanted of an item: its order lines by row, and groups by their first line."""

    lines: tuple[OrderLine, ...]
    groups: tuple[Group, ...]


def wanted_of(network: Network, options: Options, item: int) -> Wanted:
    """Return what is wanted of ``item``.

    Raises ``UnusableNetworkError`` where a quantity is off the step and may not be rounded.
    """
    demand = network.demand
    origins = _origins(network)
    units: dict[int, Fraction] = {}
    places: dict[tuple[object, ...], int] = {}
    lines: list[OrderLine] = []
    firsts: list[OrderLine] = []
    sums: list[int] = []
    for row in np.flatnonzero(demand.item == item).tolist():
        code = int(demand.unit.codes[row])
        if code not in units:
            units[code] = _units(network, item, demand.unit.values[code])
        wanted = _steps(network, options, item, row, units[code])
        priority, cost = _importance(network, options, row, units[code])
        allowed = int(demand.origins.codes[row])
        key = (int(demand.site[row]), priority, cost, allowed)
        group = places.setdefault(key, len(places)) if wanted else -1
        line = OrderLine(
            row=row,
            site=int(demand.site[row]),
            wanted=wanted,
            priority=priority,
            shortage_cost=cost,
            origins=origins[allowed] if allowed >= 0 else None,
            group=group,
        )
        lines.append(line)
        if group == len(firsts):
            firsts.append(line)
            sums.append(0)
        if group >= 0:
            sums[group] += wanted
    return Wanted(
        lines=tuple(lines),
        groups=tuple(
            Group(
                # Order lines are sorted by reference: the first of a group has the smallest.
                label=demand.reference[line.row].decode(),
                site=line.site,
                wanted=together,
                priority=line.priority,
                shortage_cost=line.shortage_cost,
                origins=line.origins,
            )
            for line, together in zip(firsts, sums, strict=True)
        ),
    )


def _origins(network: Network) -> list[frozenset[int]]:
    """Return, by code of ``origins``, the positions of the sites named."""
    place = {site.id: position for position, site in enumerate(network.sites)}
    return [
        frozenset(place[site] for site in json.loads(text))
        for text in network.demand.origins.values
    ]


def _units(network: Network, item: int, unit: str) -> Fraction:
    """Return the item units in one ``unit``."""
    units = item_units(network.items[item], unit)
    if units is None:
        raise UnusableNetworkError(f"item {network.items[item].id!r} is not ordered by {unit!r}")
    return units


def _steps(network: Network, options: Options, item: int, row: int, units: Fraction) -> int:
    """Return what a row wants in whole steps, rounded as the options say."""
    quantity = network.demand.quantity.fraction(row) or Fraction(0)
    exact = quantity * units / network.items[item].step
    if exact.denominator == 1:
        return exact.numerator
    if options.demand_rounding == "up":
        return -(-exact.numerator // exact.denominator)
    if options.demand_rounding == "down":
        return exact.numerator // exact.denominator
    reference = network.demand.reference[row].decode()
    raise UnusableNetworkError(f"order line {reference!r} is off the step")


def _importance(
    network: Network, options: Options, row: int, units: Fraction
) -> tuple[int, Fraction | None]:
    """Return the priority of a row and None, or 0 and its shortage money per item unit."""
    demand = network.demand
    for column in (demand.shortage_cost, demand.worth_at_most):
        money = column.fraction(row)
        if money is not None:
            return 0, money / units
    priority = int(demand.priority[row])
    if priority:
        return priority, None
    if options.worth_at_most is not None:
        return 0, options.worth_at_most
    return PRIORITY_DEFAULT, None
