"""What is wanted of one item: order lines, and the groups that need not be told apart."""

import json
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from typing import NamedTuple

import numpy as np

from service.network.columns import Network
from service.network.options import Options
from service.network.units import item_units
from service.proof.calendar import day_of
from service.proof.rulings import UnusableNetworkError

# Who names no importance has this priority.
PRIORITY_DEFAULT = 5


class OrderLine(NamedTuple):
    """One demand row in steps: ``wanted`` after rounding, its importance and its origins.

    ``priority`` is 0 where the line competes in money, ``shortage_cost`` per item unit; ``origins``
    are positions of sites, None where all may serve it. ``group`` is -1 where nothing is wanted.
    ``exact`` says that rounding changed nothing.
    """

    row: int
    site: int
    wanted: int
    exact: bool
    priority: int
    shortage_cost: Fraction | None
    origins: frozenset[int] | None
    group: int


class Group(NamedTuple):
    """Order lines of one site with one importance, the same origins and dates, wanted together.

    Dates are days; ``late_cost`` is money per item unit and day.
    """

    label: str
    site: int
    wanted: int
    priority: int
    shortage_cost: Fraction | None
    origins: frozenset[int] | None
    earliest: int | None = None
    due: int | None = None
    latest: int | None = None
    late_cost: Fraction | None = None


class Late(NamedTuple):
    """How late goods on an arc to a group are: days, and what a step weighs, or costs in money."""

    days: int
    weight: int
    money: Fraction


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
    rows = np.flatnonzero(demand.item == item)
    units = {
        code: _units(network, item, demand.unit.values[code])
        for code in set(demand.unit.codes[rows].tolist())
    }
    steps_in = {
        code: unit / (10**demand.quantity.exponent * network.items[item].step)
        for code, unit in units.items()
    }
    # Whether a row says for itself what a step short of it costs.
    in_money = (demand.shortage_cost.present | demand.worth_at_most.present)[rows].tolist()
    # Who says neither what it costs nor how important it is.
    worth = options.worth_at_most
    unnamed = (PRIORITY_DEFAULT, None) if worth is None else (0, worth)
    dates_of = _dates(network, item)
    places: dict[tuple[object, ...], int] = {}
    lines: list[OrderLine] = []
    firsts: list[OrderLine] = []
    sums: list[int] = []
    for row, site, code, quantity, named, allowed, paid in zip(
        rows.tolist(),
        demand.site[rows].tolist(),
        demand.unit.codes[rows].tolist(),
        demand.quantity.values[rows].tolist(),
        demand.priority[rows].tolist(),
        demand.origins.codes[rows].tolist(),
        in_money,
        strict=True,
    ):
        ratio = steps_in[code]
        wanted, over = divmod(quantity * ratio.numerator, ratio.denominator)
        if over:
            wanted = _rounded(network, options, row, down=wanted)
        priority, cost = (named, None) if named else unnamed
        if paid:
            priority, cost = 0, _own_worth(network, row, units[code])
        key = (site, priority, cost, allowed, *dates_of(row))
        group = places.setdefault(key, len(places)) if wanted else -1
        accepted = origins[allowed] if allowed >= 0 else None
        line = OrderLine(row, site, wanted, not over, priority, cost, accepted, group)
        lines.append(line)
        if group == len(firsts):
            firsts.append(line)
            sums.append(0)
        if group >= 0:
            sums[group] += wanted
    dates = [dates_of(line.row) for line in firsts]
    labels: list[bytes] = demand.reference[[line.row for line in firsts]].tolist() if firsts else []
    return Wanted(
        lines=tuple(lines),
        groups=tuple(
            # Order lines are sorted by reference: the first of a group has the smallest.
            Group(
                label.decode(),
                line.site,
                together,
                line.priority,
                line.shortage_cost,
                line.origins,
                *own,
            )
            for label, line, together, own in zip(labels, firsts, sums, dates, strict=True)
        ),
    )


_Dates = tuple[int | None, int | None, int | None, Fraction | None]


def _dates(network: Network, item: int) -> Callable[[int], _Dates]:
    """Return what tells the dates of an order line: its window, its wish, and money for a day."""
    demand = network.demand
    columns = (demand.earliest, demand.due, demand.latest)
    if not any(column.values for column in columns):
        return lambda _: (None, None, None, None)
    known = [[*map(day_of, column.values), None] for column in columns]

    def dates(row: int) -> _Dates:
        earliest, due, latest = (
            days[column.codes[row]] for days, column in zip(known, columns, strict=True)
        )
        money = demand.late_cost_per_day.fraction(row)
        if money is not None:
            money /= _units(network, item, str(demand.unit.text(row)))
        return earliest, due, latest, money

    return dates


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


def _rounded(network: Network, options: Options, row: int, *, down: int) -> int:
    """Return what a row off the step wants in whole steps, rounded as the options say."""
    if options.demand_rounding == "up":
        return down + 1
    if options.demand_rounding == "down":
        return down
    reference = network.demand.reference[row].decode()
    raise UnusableNetworkError(f"order line {reference!r} is off the step")


def _own_worth(network: Network, row: int, units: Fraction) -> Fraction | None:
    """Return the money per item unit that a row says for itself that it is worth."""
    demand = network.demand
    for column in (demand.shortage_cost, demand.worth_at_most):
        money = column.fraction(row)
        if money is not None:
            return money / units
    return None
