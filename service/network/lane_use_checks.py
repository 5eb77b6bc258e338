"""Checks of lanes against the items that can use them, and of order lines that name origins."""

import json

import numpy as np

from service.network.assembly import Assembly
from service.network.columns import BoolArray, IntArray, Network, Texts
from service.network.days import is_dated
from service.network.faults import FaultList
from service.network.lane_names import identical_lanes, taken_names
from service.network.loops import loop_below_zero
from service.network.naming import lane_names
from service.network.not_yet import SHARED, refusal
from service.network.reach import LaneUse
from service.network.row_checks import MEASURE_ADVICE, measure_grain, off_step_detail
from service.network.sharing import UNITS_ADVICE, Sharing
from service.network.table_rows import off_grid
from service.network.tariffs import tariffs_of
from service.network.units import per_unit

LANES_NAMED_MAX = 8


def check_names(assembly: Assembly) -> None:
    """Find lanes that no name could tell apart, and ids that are the name of another lane."""
    network, faults = assembly.network, assembly.sent.lanes.faults
    rows = np.sort(assembly.lane_rows[identical_lanes(network)])
    detail = "Another lane without an id is the same in all that names it. Give both an id."
    faults.at_rows("", rows, "identical_lanes", detail)
    rows = np.sort(assembly.lane_rows[taken_names(network)])
    detail = "This is the name of another lane, which has no id. Choose another id."
    faults.at_rows("id", rows, "lane_name_taken", detail)


def check_lanes_for_any_item(
    assembly: Assembly, use: LaneUse, sharing: Sharing, doubts: FaultList
) -> None:
    """Find what a lane without an item leaves open, or says in a measure that an item lacks."""
    network, lanes = assembly.network, assembly.network.lanes
    if len(use.any_item) == 0:
        return
    units = {unit: code for code, unit in enumerate({item.unit for item in network.items})}
    plain = lanes.measure.values == ("unit",) and not lanes.must_ship.present.any()
    if plain and len(units) == 1 and not lanes.capacity.present.any():
        # Without limits and unlike units there is nothing to ask of a lane's users.
        return
    any_item = lanes.item < 0
    users = np.zeros(len(lanes), dtype=np.int64)
    first_unit = np.full(len(lanes), -1, dtype=np.int32)
    unlike = np.zeros(len(lanes), dtype=np.bool_)
    shared = any_item & _together(network)
    on_shared: list[IntArray] = []
    for item, thing in enumerate(network.items):
        rows = use.rows(item)
        rows = rows[any_item[rows]]
        users[rows] += 1
        unit = units[thing.unit]
        unlike[rows] |= (first_unit[rows] >= 0) & (first_unit[rows] != unit)
        first_unit[rows] = unit
        on_shared.append(rows[shared[rows]])
        if not plain:
            _check_measures(assembly, item, rows)
    if shared.any() and (is_dated(network) or tariffs_of(network.head)):
        detail = refusal("per: together, with dates or tariffs", SHARED)
        rows = np.sort(assembly.lane_rows[np.flatnonzero(shared)])
        assembly.sent.lanes.faults.at_rows("per", rows, "not_yet", detail)
    elif shared.any():
        sharing.on_lanes(on_shared, users)
        summed = shared & unlike & (lanes.measure.codes == _code_of("unit", lanes.measure))
        rows = np.sort(assembly.lane_rows[np.flatnonzero(summed)])
        assembly.sent.lanes.faults.at_rows("per", rows, "units_differ", UNITS_ADVICE)
    open_limit = (users > 1) & (lanes.per.codes < 0)
    detail = (
        "More than one item can use this lane, so its limit must say per: item "
        "(for each item by itself) or per: together (for all of them)."
    )
    for name, column in (("must_ship", lanes.must_ship), ("capacity", lanes.capacity)):
        rows = assembly.lane_rows[np.flatnonzero(open_limit & column.present)]
        assembly.sent.lanes.faults.at_rows(name, np.sort(rows), "per_missing", detail)
    forced = assembly.lane_rows[np.flatnonzero((users == 0) & lanes.must_ship.present & any_item)]
    sent = assembly.sent.lanes.faults
    doubts.caution(
        "must_ship_without_item",
        "No item can use this lane: no stock reaches it, or nobody behind it wants any.",
        [
            (sent.place("must_ship", row), sent.value("must_ship", row))
            for row in np.sort(forced)[:3].tolist()
        ],
        len(forced),
    )
    rows = assembly.lane_rows[np.flatnonzero(unlike & lanes.unit_cost.present)]
    rows = np.sort(rows[~assembly.sent.lanes.measured[rows]])
    doubts.caution(
        "rate_for_unlike_units",
        "Items in different units can use this lane, and its unit_cost states no measure.",
        [(sent.place("unit_cost", row), sent.value("unit_cost", row)) for row in rows[:3].tolist()],
        len(rows),
    )


def _code_of(word: str, column: Texts) -> int:
    """Return the code of a text in a column, -2 (no row's) where it does not occur."""
    return column.values.index(word) if word in column.values else -2


def _together(network: Network) -> BoolArray:
    """Return, in shape (lanes,), which lanes have limits for all their items together."""
    per = network.lanes.per
    limited = network.lanes.must_ship.present | network.lanes.capacity.present
    shared: BoolArray = limited & (per.codes == _code_of("together", per))
    return shared


def _check_measures(assembly: Assembly, item: int, rows: IntArray) -> None:
    """Check the measures and forced quantities of lanes without an item for one of their users."""
    network, lanes = assembly.network, assembly.network.lanes
    thing, faults = network.items[item], assembly.sent.lanes.faults
    for code in np.flatnonzero(np.bincount(lanes.measure.codes[rows])).tolist():
        measure = lanes.measure.values[code]
        members = rows[lanes.measure.codes[rows] == code]
        if not per_unit(thing, measure):
            detail = f"{thing.id} can use this lane. {MEASURE_ADVICE}"
            name = "measure" if "measure" in faults.sheet.columns else ""
            sent = np.sort(assembly.lane_rows[members])
            faults.at_rows(name, sent, "measure_unknown", detail, once=True)
            continue
        size = measure_grain(thing, measure)
        # What several items must reach together is kept exact and need not be whole steps of each.
        forced = members[lanes.must_ship.present[members] & ~_together(network)[members]]
        if size is not None and len(forced):
            off = np.sort(assembly.lane_rows[off_grid(lanes.must_ship, forced, size)])
            faults.at_rows("must_ship", off, "off_step", off_step_detail(thing, size, measure))


def check_loops(assembly: Assembly, use: LaneUse, faults: FaultList) -> None:
    """Find, for each item, a loop of lanes that costs less than nothing."""
    network, lanes = assembly.network, assembly.sent.lanes.faults
    seen: set[tuple[int, ...]] = set()
    for item, thing in enumerate(network.items):
        loop = loop_below_zero(network, use, item)
        if loop is None or tuple(sorted(loop.tolist())) in seen:
            continue
        seen.add(tuple(sorted(loop.tolist())))
        names = lane_names(network, loop[:LANES_NAMED_MAX])
        more = f" and {len(loop) - LANES_NAMED_MAX} more" if len(loop) > LANES_NAMED_MAX else ""
        detail = (
            f"For {thing.id} these lanes lead in a loop whose costs, handling included, add up to "
            f"less than zero: {', '.join(names)}{more}. Correct a cost."
        )
        row = int(assembly.lane_rows[loop[0]])
        place = lanes.place("unit_cost", row)
        faults.add(place, "loop_below_zero", detail, lanes.value("unit_cost", row))


def check_origins(assembly: Assembly, use: LaneUse, faults: FaultList) -> None:
    """Find order lines that name some, but not all, sites whose stock a cross-dock mixes.

    Goods that arrive through a cross-dock no longer tell where they come from.
    """
    network, demand = assembly.network, assembly.network.demand
    choosy = np.flatnonzero((demand.origins.codes >= 0) & (demand.quantity.values > 0))
    if len(choosy) == 0:
        return
    order = choosy[np.argsort(demand.item[choosy], kind="stable")]
    bounds = np.flatnonzero(np.diff(demand.item[order])) + 1
    wrong = [row for rows in np.split(order, bounds) for row in _mixed_lines(network, use, rows)]
    lines = assembly.sent.demand.faults
    detail = (
        "Through a cross-dock comes stock of named and of other sites, and nobody can tell which "
        "is which there. Name all of them, or none."
    )
    for row in sorted(assembly.demand_rows[wrong].tolist()):
        faults.add(
            lines.place("origins", row),
            "origins_behind_cross_dock",
            detail,
            lines.value("origins", row),
        )


def _mixed_lines(network: Network, use: LaneUse, lines: IntArray) -> list[int]:
    """Return those of some order lines of one item whose named stock mixes with other stock."""
    demand, lanes = network.demand, network.lanes
    item = int(demand.item[lines[0]])
    rows = use.rows(item)
    # A site that is no cross-dock sends its own stock alone: all of it is named or none.
    rows = rows[use.passes_on[lanes.origin[rows]]]
    rows = rows[np.argsort(lanes.destination[rows], kind="stable")]
    ends = lanes.destination[rows]
    sites = {site.id: position for position, site in enumerate(network.sites)}
    behind: dict[int, frozenset[int]] = {}
    answers: dict[tuple[int, int], bool] = {}
    wrong: list[int] = []
    for line in lines.tolist():
        key = site, code = int(demand.site[line]), int(demand.origins.codes[line])
        if key not in answers:
            low, high = np.searchsorted(ends, [site, site + 1])
            named = {sites[origin] for origin in json.loads(demand.origins.values[code])}
            answers[key] = False
            for place in set(lanes.origin[rows[low:high]].tolist()):
                if place not in behind:
                    reaching = np.flatnonzero(use.stock_reaching(item, place))
                    behind[place] = frozenset(reaching.tolist())
                if not named.isdisjoint(behind[place]) and not named.issuperset(behind[place]):
                    answers[key] = True
                    break
        if answers[key]:
            wrong.append(line)
    return wrong
