"""The flow on every arc, as plan and certificate say it."""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from service.network.columns import Network
from service.network.naming import lane_rows
from service.proof.arcs import Arc, ItemArcs
from service.proof.exact import Whole, joined, sums_at, whole
from service.proof.shapes import amount
from service.proof.violations import Findings

Key = tuple[object, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanLine:
    """A plan line with its names found: ``row`` of the lane, -1 for goods used where they are."""

    place: str
    row: int
    item: int
    origin: int
    destination: int
    document: Mapping[str, Any]


class Names:
    """Finds sites, items and lanes by what documents call them."""

    def __init__(self, network: Network) -> None:
        """Index the ids of sites and items."""
        self.network = network
        self.sites = {site.id: place for place, site in enumerate(network.sites)}
        self.items = {item.id: place for place, item in enumerate(network.items)}

    def plan_lines(
        self, documents: Sequence[Mapping[str, Any]], findings: Findings
    ) -> list[PlanLine] | None:
        """Return the plan lines with names found; None if one of them names what is not there."""
        names = [line["lane"] for line in documents if line["lane"] is not None]
        rows = iter(lane_rows(self.network, names))
        lines = []
        seen: set[tuple[int, int, int]] = set()
        sound = True
        for position, line in enumerate(documents):
            place = f"/plan_lines/{position}"
            row = -1 if line["lane"] is None else next(rows)
            origin = self.sites.get(line["origin"], -1)
            destination = self.sites.get(line["destination"], -1)
            item = self.items.get(line["item"], -1)
            if min(origin, destination, item) < 0 or (row < 0 and line["lane"] is not None):
                findings.add("name_unknown", "a plan line names what is not there", place=place)
                sound = False
                continue
            key = (row, item, origin if row < 0 else -1)
            if key in seen:
                findings.add("listed_twice", "a plan line for the same lane and item", place=place)
                sound = False
            seen.add(key)
            lines.append(
                PlanLine(
                    place=place,
                    row=row,
                    item=item,
                    origin=origin,
                    destination=destination,
                    document=line,
                )
            )
        return lines if sound else None


def steps_of(text: str, step: Fraction) -> int | None:
    """Return a quantity in steps, None unless it is a whole number of them above 0."""
    steps = amount(text) / step
    return steps.numerator if steps.denominator == 1 and steps > 0 else None


def item_flows(
    arcs: ItemArcs,
    lines: Sequence[PlanLine],
    proof: Mapping[str, Any],
    *,
    names: Names,
    findings: Findings,
) -> Whole | None:
    """Return the flow on each arc in steps, lanes first; None where the documents do not say it.

    ``lines`` are the plan lines of the item that have a lane. What no document states follows from
    the rest: what is wanted returns to the root, and what enters a site is handled there.
    """
    lane_flow = _lane_flow(arcs, lines, findings)
    stated = _stated(arcs, proof, names, findings)
    if lane_flow is None or stated is None:
        return None
    nodes = len(arcs.nodes)
    moved = np.flatnonzero(lane_flow != 0)
    inflow: list[int] = sums_at(nodes, arcs.lane_head[moved], lane_flow[moved]).tolist()
    outflow: list[int] = sums_at(nodes, arcs.lane_tail[moved], lane_flow[moved]).tolist()
    flow = [
        arc.minimum if arc.kind == "want" else stated.get((arc.kind, *arc.key), 0)
        for arc in arcs.arcs
    ]
    _follow(arcs, flow, inflow=inflow, outflow=outflow, stated=stated)
    return joined([lane_flow, whole(flow)])


def _follow(
    arcs: ItemArcs,
    flow: list[int],
    *,
    inflow: list[int],
    outflow: list[int],
    stated: Mapping[Key, int],
) -> None:
    """Put into ``flow`` what follows from lanes and stated flows at supply, entry and exit.

    ``inflow`` and ``outflow`` are what lanes bring to each node and take from it.
    """
    handled = []
    for position, arc in enumerate(arcs.arcs):
        if arc.kind == "draw":
            inflow[arc.head] += flow[position]
        elif arc.kind == "pass":
            outflow[arc.head] -= flow[position]
        elif arc.kind == "supply":
            flow[position] = sum(stated.get((kind, *arc.key), 0) for kind in ("draw", "keep"))
        elif arc.kind == "enter":
            flow[position] = inflow[arc.tail]
            inflow[arc.head] += inflow[arc.tail]
        elif arc.kind == "handle":
            handled.append(position)
    for position, arc in enumerate(arcs.arcs):
        if arc.kind == "leave":
            flow[position] = outflow[arc.head]
    for position in handled:
        flow[position] = inflow[arcs.arcs[position].tail]


def _lane_flow(arcs: ItemArcs, lines: Sequence[PlanLine], findings: Findings) -> Whole | None:
    """Return the flow on each usable lane; None where a plan line does not say it."""
    rows = np.array([line.row for line in lines], dtype=np.int64)
    places = np.searchsorted(arcs.rows, rows)
    steps = []
    sound = True
    for line, place in zip(lines, places.tolist(), strict=True):
        if place == len(arcs.rows) or arcs.rows[place] != line.row:
            findings.add("name_unknown", "the item cannot use this lane", place=line.place)
            sound = False
        quantity = steps_of(line.document["quantity"], arcs.step)
        if quantity is None:
            findings.add("quantity_wrong", "no whole number of steps above 0", place=line.place)
            sound = False
        steps.append(quantity or 0)
    if not sound:
        return None
    flow = whole(steps)
    result: Whole = np.zeros(len(arcs.rows), dtype=flow.dtype)
    result[places] = flow
    return result


def _stated(
    arcs: ItemArcs, proof: Mapping[str, Any], names: Names, findings: Findings
) -> dict[Key, int] | None:
    """Return the flows that the certificate lists, by kind and key of their arc; None if wrong."""
    known = {(arc.kind, *arc.key) for arc in arcs.arcs if arc.key}
    lists: tuple[tuple[str, Callable[[Mapping[str, Any], int], Key]], ...] = (
        ("draws", lambda entry, site: ("draw", site, entry["tier"])),
        ("kept", lambda entry, site: ("keep", site, entry["tier"])),
        (
            "serves",
            lambda entry, site: ("serve", site, entry["group"], entry["from"], entry["origin"]),
        ),
        ("passes", lambda entry, site: ("pass", site, entry["origin"])),
        ("shortages", lambda entry, site: ("short", site, entry["group"])),
    )
    flows: dict[Key, int] = {}
    sound = True
    for table, key_of in lists:
        for position, entry in enumerate(proof[table]):
            place = f"/items/{proof['item']}/{table}/{position}"
            key = key_of(entry, names.sites.get(entry["site"], -1))
            quantity = steps_of(entry["quantity"], arcs.step)
            if key not in known:
                findings.add("name_unknown", "there is no such arc", place=place)
                sound = False
            elif key in flows:
                findings.add("listed_twice", "a flow is stated twice", place=place)
                sound = False
            if quantity is None:
                findings.add("quantity_wrong", "no whole number of steps above 0", place=place)
                sound = False
            flows[key] = quantity or 0
    return flows if sound else None


def describe(arcs: ItemArcs, position: int, network: Network) -> str:
    """Return what a person calls the arc at ``position``."""
    item = network.items[arcs.item].id
    if position < len(arcs.rows):
        row = int(arcs.rows[position])
        origin = network.sites[int(network.lanes.origin[row])].id
        destination = network.sites[int(network.lanes.destination[row])].id
        return f"{item}: lane {row} from {origin} to {destination}"
    arc: Arc = arcs.arcs[position - len(arcs.rows)]
    return f"{item}: {arc.kind} from {_named(arcs, arc.tail, network)} to " + _named(
        arcs, arc.head, network
    )


def _named(arcs: ItemArcs, place: int, network: Network) -> str:
    """Return what a person calls a node."""
    node = arcs.nodes[place]
    if node.site < 0:
        return node.side
    qualifier = "" if node.qualifier is None else f" {node.qualifier}"
    return f"{network.sites[node.site].id} {node.side}{qualifier}"
