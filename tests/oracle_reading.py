"""A network definition read the slow and plain way, for the oracles: no code of the service.

Written from the published meaning of the fields alone: one item at a time, every quantity a whole
number of steps, every cost the exact money of one step. Reads lanes, supply and demand as rows.
"""

from collections.abc import Iterable, Mapping
from datetime import date, datetime
from fractions import Fraction
from math import floor
from typing import Any

from tests.oracle_problem import (
    ItemProblem,
    OracleKept,
    OracleLane,
    OracleLine,
    OracleStock,
)

Document = Mapping[str, Any]

# Item units in one row unit, UN/ECE Recommendation 20: kilogram, tonne, gram.
RECOMMENDATION_20 = {
    ("KGM", "TNE"): Fraction(1000),
    ("KGM", "GRM"): Fraction(1, 1000),
}


def exact(value: object) -> Fraction:
    """Read a decimal as it is written, never through a binary float."""
    return Fraction(str(value))


def read_items(document: Document, options: Mapping[str, Any]) -> list[ItemProblem]:
    """Return one problem for each item of ``document``, in the order of ids."""
    items = sorted(document["items"], key=lambda item: str(item["id"]).encode())
    return [_read_item(document, item, options) for item in items]


def _read_item(document: Document, item: Document, options: Mapping[str, Any]) -> ItemProblem:
    step = exact(item.get("step", "1"))
    rules = [rule for rule in document.get("rules", []) if applies(document, rule, item)]
    sites = {site["id"]: site for site in document["sites"]}
    closed = frozenset(
        site["id"]
        for rule in rules
        if rule["rule"] == "closure" and "sites" in rule
        for site in document["sites"]
        if site_selected(site, rule["sites"])
    )
    return ItemProblem(
        item=item["id"],
        step=step,
        sites=tuple(sites),
        cross_docks=frozenset(i for i, site in sites.items() if "cross_dock" in site["roles"]),
        closed=closed,
        stocked=frozenset(_sites_above_zero(document["supply"], item)),
        handling={i: _handling(site, item["id"]) * step for i, site in sites.items()},
        lanes=tuple(_read_lanes(document, item, rules, closed)),
        stocks=tuple(_read_stocks(document, item)),
        lines=tuple(_read_lines(document, item, options)),
        kept=tuple(_read_kept(document, item)),
        limits=_read_limits(document, item, rules),
    )


def applies(document: Document, rule: Document, item: Document) -> bool:
    """Return whether ``rule`` is in force on the local date of the cut-off and touches ``item``."""
    today = datetime.fromisoformat(document["cut_off"]).date()
    if "from" in rule and today < date.fromisoformat(rule["from"]):
        return False
    if "until" in rule and today > date.fromisoformat(rule["until"]):
        return False
    return _matches(rule.get("items", {}), ids=item["id"], tag=item.get("tags", []))


def _matches(selector: Document, **properties: object) -> bool:
    """Return whether every key of ``selector`` holds one of the thing's values for it."""
    for key, wanted in selector.items():
        own = properties[key]
        values = set(own) if isinstance(own, list) else {own}
        if not values & set(wanted):
            return False
    return True


def site_selected(site: Document, selector: Document) -> bool:
    """Return whether a selector picks a site."""
    return _matches(selector, ids=site["id"], role=site["roles"], tag=site.get("tags", []))


def lane_selected(lane: Document, selector: Document) -> bool:
    """Return whether a selector picks a lane."""
    return _matches(
        selector,
        ids=lane.get("id"),
        origin=lane["origin"],
        destination=lane["destination"],
        carrier=lane.get("carrier"),
        tag=lane.get("tags", []),
    )


def _handling(site: Document, item: str) -> Fraction:
    cost = site.get("handling_cost", "0")
    return exact(cost.get(item, "0") if isinstance(cost, Mapping) else cost)


def _factor(item: Document, unit: str | None) -> Fraction:
    """Return how many item units one ``unit`` of a row is."""
    if unit is None or unit == item["unit"]:
        return Fraction(1)
    for pack in item.get("packs", []):
        if pack["unit"] == unit:
            return exact(pack["contains"])
    return RECOMMENDATION_20[item["unit"], unit]


def per_unit(item: Document, measure: str | None) -> Fraction:
    """Return how much of ``measure`` one item unit is."""
    if measure in {None, "unit"}:
        return Fraction(1)
    if measure in {"weight_kg", "volume_m3"}:
        return exact(item[measure])
    return 1 / _factor(item, measure)


def _read_lanes(
    document: Document, item: Document, rules: Iterable[Document], closed: frozenset[str]
) -> Iterable[OracleLane]:
    step = exact(item.get("step", "1"))
    for row in _usable_rows(document, item):
        lane = document["lanes"][row]
        per_step = per_unit(item, lane.get("measure")) * step
        # What all items must reach together no one of them must reach.
        together = lane.get("per") == "together" and "item" not in lane
        least = Fraction(0) if together else exact(lane.get("must_ship", "0")) / per_step
        most = floor(exact(lane["capacity"]) / per_step) if "capacity" in lane else None
        for rule in rules:
            if rule["rule"] == "fixed_quantity" and lane_selected(lane, rule["lanes"]):
                least = exact(rule["quantity"]) / per_step
                most = floor(least)
        for rule in rules:
            shut = rule["rule"] == "closure" and "lanes" in rule
            if shut and lane_selected(lane, rule["lanes"]):
                least, most = Fraction(0), 0
        if closed & {lane["origin"], lane["destination"]}:
            least, most = Fraction(0), 0
        assert least.denominator == 1, "a forced quantity off the step is an input error"
        yield OracleLane(
            row=row,
            origin=lane["origin"],
            destination=lane["destination"],
            cost=exact(lane["unit_cost"]) * per_step,
            least=int(least),
            most=most,
        )


def _usable_rows(document: Document, item: Document) -> list[int]:
    """Return the rows of lanes that ``item`` can use.

    Its own lanes, and lanes of any item that some of its stock reaches and from which some of its
    demand, or one of its own lanes that must ship, is reached; goods pass on at cross-docks only.
    """
    carries = {
        row: lane
        for row, lane in enumerate(document["lanes"])
        if lane.get("item") in {None, item["id"]}
    }
    docks = {site["id"] for site in document["sites"] if "cross_dock" in site["roles"]}
    stocked = _sites_above_zero(document["supply"], item)
    wanting = _sites_above_zero(document["demand"], item) | {
        lane["origin"]
        for lane in carries.values()
        if "item" in lane and exact(lane.get("must_ship", "0")) > 0 and lane["origin"] in docks
    }
    leaving = _spread(stocked, docks, [(x["origin"], x["destination"]) for x in carries.values()])
    arriving = _spread(wanting, docks, [(x["destination"], x["origin"]) for x in carries.values()])
    return [
        row
        for row, lane in carries.items()
        if lane.get("item") == item["id"]
        or (
            lane["origin"] in (stocked | (leaving & docks))
            and lane["destination"] in (wanting | (arriving & docks))
        )
    ]


def _sites_above_zero(rows: Iterable[Document], item: Document) -> set[str]:
    return {row["site"] for row in rows if row["item"] == item["id"] and exact(row["quantity"]) > 0}


def _spread(
    first: Iterable[str], docks: Iterable[str], moves: Iterable[tuple[str, str]]
) -> set[str]:
    """Return all places that are reached from ``first``, going on only from ``docks``."""
    first, docks, moves = set(first), set(docks), list(moves)
    reached = set(first)
    while True:
        starts = first | (reached & docks)
        new = {end for start, end in moves if start in starts} - reached
        if not new:
            return reached
        reached |= new


def _read_stocks(document: Document, item: Document) -> Iterable[OracleStock]:
    """Rows of one site and one cost are one stock; running totals are rounded down to steps."""
    step = exact(item.get("step", "1"))
    by_site: dict[str, dict[Fraction, Fraction]] = {}
    for row in document["supply"]:
        if row["item"] == item["id"]:
            factor = _factor(item, row.get("unit"))
            costs = by_site.setdefault(row["site"], {})
            cost = exact(row.get("unit_cost", "0")) / factor
            costs[cost] = costs.get(cost, Fraction(0)) + exact(row["quantity"]) * factor
    for site, costs in by_site.items():
        total = Fraction(0)
        for cost in sorted(costs):
            before, total = total, total + costs[cost]
            steps = floor(total / step) - floor(before / step)
            yield OracleStock(site=site, cost=cost * step, steps=steps)


def _read_lines(
    document: Document, item: Document, options: Mapping[str, Any]
) -> Iterable[OracleLine]:
    step = exact(item.get("step", "1"))
    for number, row in enumerate(document["demand"], start=1):
        if row["item"] != item["id"]:
            continue
        factor = _factor(item, row.get("unit"))
        steps = exact(row["quantity"]) * factor / step
        if options.get("demand_rounding") == "up":
            steps = Fraction(-floor(-steps))
        elif options.get("demand_rounding") == "down":
            steps = Fraction(floor(steps))
        assert steps.denominator == 1, "demand off the step is an input error unless rounded"
        priority, money = _claim(row, factor, step, options)
        yield OracleLine(
            reference=row.get("reference", f"#{number}"),
            site=row["site"],
            steps=int(steps),
            priority=priority,
            money=money,
            origins=frozenset(row["origins"]) if "origins" in row else None,
        )


def _claim(
    row: Document, factor: Fraction, step: Fraction, options: Mapping[str, Any]
) -> tuple[int | None, Fraction | None]:
    """Return what speaks for a line: its priority, or its money per step."""
    if "priority" in row:
        return row["priority"], None
    for name in ("shortage_cost", "worth_at_most"):
        if name in row:
            return None, exact(row[name]) / factor * step
    if options.get("worth_at_most") is not None:
        return None, exact(options["worth_at_most"]) * step
    return 5, None


def _read_kept(document: Document, item: Document) -> Iterable[OracleKept]:
    step = exact(item.get("step", "1"))
    for row in document["supply"]:
        if row["item"] == item["id"] and "keep" in row:
            quantity = exact(row["keep"]["quantity"]) * _factor(item, row.get("unit"))
            steps, priority = floor(quantity / step), row["keep"]["priority"]
            if steps:
                yield OracleKept(site=row["site"], steps=steps, priority=priority)


def _read_limits(
    document: Document, item: Document, rules: Iterable[Document]
) -> dict[tuple[str, str], int]:
    """Return the least limit of each (site, flow), in steps."""
    limits: dict[tuple[str, str], int] = {}
    step = exact(item.get("step", "1"))
    for rule in rules:
        if rule["rule"] == "throughput":
            per_step = per_unit(item, rule.get("measure")) * step
            steps = floor(exact(rule["maximum"]) / per_step)
            for site in document["sites"]:
                if site_selected(site, rule["sites"]):
                    place = (site["id"], rule["flow"])
                    limits[place] = min(steps, limits.get(place, steps))
    return limits
