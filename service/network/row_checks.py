"""Checks of the rows of supply, demand and lanes against items, sites and options.

Every check works on whole columns and reports rows; a row that is faulty in what a check looks at
is passed over, so that one mistake is reported once.
"""

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from service.network.columns import BoolArray, CodeArray, Decimals, Item, Texts
from service.network.options import Options
from service.network.quantities import exact_text
from service.network.table_faults import TableFaults
from service.network.table_rows import by_item_and_text, off_grid
from service.network.tables import ReadDemand, ReadLanes, ReadSupply
from service.network.things import Things
from service.network.units import item_units, per_unit

MEASURE_ADVICE = "Say unit, weight_kg, volume_m3 or a pack that the item has (with its weight)."


def check_supply(read: ReadSupply, things: Things) -> None:
    """Find supply rows that contradict items, sites or themselves."""
    table, faults = read.table, read.faults
    _check_role(faults, "site", table.site, things.with_role("warehouse"), "warehouse")
    _check_units(faults, table.item, table.unit, things)
    _check_stock(read)
    kept = np.flatnonzero((table.keep_priority > 0) & (table.site >= 0) & (table.item >= 0))
    keys = table.site[kept].astype(np.int64) * max(1, len(things.items)) + table.item[kept]
    _, first = np.unique(keys, return_index=True)
    repeated = np.delete(kept, first)
    detail = "What stays in stock is said on one row of a site and item. Add it up there."
    faults.at_rows("keep", repeated, "keep_twice", detail)


def _check_stock(read: ReadSupply) -> None:
    """Find rows whose quantity is not what is on hand less what is reserved or on hold."""
    table, faults = read.table, read.faults
    parts = table.reserved.present | table.on_hold.present
    alone = np.flatnonzero(parts & ~table.on_hand.present & ~faults.faulty("on_hand"))
    name = "reserved" if "reserved" in faults.sheet.columns else "on_hold"
    detail = "Say on_hand beside it: quantity = on_hand - reserved - on_hold."
    faults.at_rows(name, alone, "on_hand_missing", detail)
    sound = table.on_hand.present & table.quantity.present
    sound &= ~faults.faulty("reserved") & ~faults.faulty("on_hold")
    columns = (table.quantity, table.on_hand, table.reserved, table.on_hold)
    quantity, on_hand, reserved, on_hold = aligned(columns)
    wrong = np.flatnonzero(sound & (quantity != on_hand - reserved - on_hold))
    detail = "The row does not add up: quantity = on_hand - reserved - on_hold."
    faults.at_rows("quantity", wrong, "stock_does_not_add_up", detail)


def check_demand(read: ReadDemand, things: Things, options: Options) -> None:
    """Find order lines that contradict items, sites, options or themselves."""
    table, faults = read.table, read.faults
    _check_role(faults, "site", table.site, things.with_role("ship_to"), "ship_to")
    factors = _check_units(faults, table.item, table.unit, things)
    if options.demand_rounding == "refuse":

        def grain(item: Item, unit: str) -> Fraction | None:
            factor = factors(item, unit)
            return None if factor is None else item.step / factor

        stated = _Stated(name="quantity", column=table.quantity, item=table.item, texts=table.unit)
        _check_steps(faults, stated, things, grain)
    ways = {
        "priority": table.priority > 0,
        "shortage_cost": table.shortage_cost.present,
        "worth_at_most": table.worth_at_most.present,
    }
    number = sum(way.astype(np.int64) for way in ways.values())
    detail = "Say one of priority, shortage_cost and worth_at_most: they exclude each other."
    for name in ("worth_at_most", "shortage_cost"):
        twice = np.flatnonzero((number > 1) & ways[name])
        faults.at_rows(name, twice, "two_kinds_of_importance", detail)
        number = np.where(ways[name], 0, number)


def check_lanes(read: ReadLanes, things: Things) -> None:
    """Find lanes that contradict items, sites or themselves."""
    table, faults = read.table, read.faults
    sends, takes = (
        things.with_role("warehouse", "cross_dock"),
        things.with_role("cross_dock", "ship_to"),
    )
    _check_role(faults, "origin", table.origin, sends, "warehouse or cross_dock")
    _check_role(faults, "destination", table.destination, takes, "cross_dock or ship_to")
    same = np.flatnonzero((table.origin == table.destination) & (table.origin >= 0))
    detail = "A lane leads from one site to another."
    faults.at_rows("destination", same, "lane_to_itself", detail)
    must_ship, capacity = aligned((table.must_ship, table.capacity))
    both = table.must_ship.present & table.capacity.present
    above = np.flatnonzero(both & (must_ship > capacity))
    detail = "More must be shipped than the lane's capacity allows."
    faults.at_rows("must_ship", above, "must_ship_above_capacity", detail)
    rows = np.flatnonzero(table.item >= 0)
    for item, measure, members in by_item_and_text(table.item, table.measure, rows):
        if not per_unit(things.items[item], measure):
            faults.at_rows("measure", members, "measure_unknown", MEASURE_ADVICE)
    stated = _Stated(name="must_ship", column=table.must_ship, item=table.item, texts=table.measure)
    _check_steps(faults, stated, things, measure_grain)


def measure_grain(item: Item, measure: str) -> Fraction | None:
    """Return how much of ``measure`` one step of an item is; None where that is not known."""
    of_unit = per_unit(item, measure)
    return of_unit * item.step if of_unit else None


def aligned(columns: tuple[Decimals, ...]) -> tuple[np.ndarray[tuple[int], np.dtype], ...]:
    """Return the values of columns at one exponent, so that they can be added and compared.

    Where that could leave 64 bits they are Python integers.
    """
    exponent = max(column.exponent for column in columns)
    exact = []
    for column in columns:
        scale = 10 ** (exponent - column.exponent)
        largest = int(np.abs(column.values).max(initial=0)) * scale
        values = column.values if largest < 2**60 else column.values.astype(object)
        exact.append(values * scale)
    return tuple(exact)


def _check_role(
    faults: TableFaults, name: str, site: CodeArray, has_role: BoolArray, role: str
) -> None:
    """Find rows at a site that cannot do what the row asks of it."""
    known = site >= 0
    lacks = np.zeros(len(site), dtype=np.bool_)
    lacks[known] = ~has_role[site[known]]
    detail = f"The site lacks the role {role}. Give it the role, or correct the row."
    faults.at_rows(name, np.flatnonzero(lacks), "role_missing", detail, once=True)


def _check_units(
    faults: TableFaults, item: CodeArray, unit: Texts, things: Things
) -> Callable[[Item, str], Fraction | None]:
    """Find rows in a unit that says nothing of their item; return the factors of the others."""
    known: dict[tuple[str, str], Fraction | None] = {}
    rows = np.flatnonzero((item >= 0) & (unit.codes >= 0))
    for position, text, members in by_item_and_text(item, unit, rows):
        thing = things.items[position]
        known[thing.id, text] = item_units(thing, text)
        if known[thing.id, text] is None:
            detail = (
                f"Say the item's unit ({thing.unit}), a pack of it, or a unit of the same kind."
            )
            faults.at_rows("unit", members, "unknown_unit", detail)
    return lambda thing, text: known[thing.id, text]


@dataclass(frozen=True, slots=True, kw_only=True)
class _Stated:
    """A column of quantities, and what they are quantities of: ``texts`` holds their units."""

    name: str
    column: Decimals
    item: CodeArray
    texts: Texts


def _check_steps(
    faults: TableFaults,
    stated: _Stated,
    things: Things,
    grain: Callable[[Item, str], Fraction | None],
) -> None:
    """Find quantities that are no whole number of steps; ``grain`` is a step in the row's terms."""
    item, texts = stated.item, stated.texts
    rows = np.flatnonzero(stated.column.present & (item >= 0) & (texts.codes >= 0))
    for position, text, members in by_item_and_text(item, texts, rows):
        thing = things.items[position]
        size = grain(thing, text)
        if size is not None:
            off = off_grid(stated.column, members, size)
            faults.at_rows(stated.name, off, "off_step", off_step_detail(thing, size, text))


def off_step_detail(item: Item, size: Fraction, text: str) -> str:
    """Return the sentence for a quantity that is no whole number of steps of ``size``."""
    return f"No whole number of steps: {item.id} ships in steps of {exact_text(size)} {text}."
