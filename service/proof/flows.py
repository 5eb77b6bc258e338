"""The flow on every arc, as plan and certificate say it."""

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from service.network.columns import Network
from service.proof.arcs import ItemArcs
from service.proof.calendar import Calendar, on_day
from service.proof.exact import Positions, Whole, sums_at, whole
from service.proof.numbers import numbers
from service.proof.violations import Findings

if TYPE_CHECKING:
    from service.proof.arc_build import Arc


def node_of(arcs: ItemArcs, entry: Mapping[str, Any], names: "Names") -> int | None:
    """Return the position of the node that a certificate names, None if there is none."""
    side = on_day(entry["side"], entry.get("day"))
    return arcs.place.get((names.sites.get(entry["site"], -1), side, entry["qualifier"]))


class PlanLine(NamedTuple):
    """A plan line with its names found: ``row`` of the lane, -1 for goods used where they are."""

    place: str
    row: int
    item: int
    origin: int
    destination: int
    document: Mapping[str, Any]


class Names:
    """Finds sites, items and lanes by what documents call them."""

    def __init__(self, calendar: Calendar) -> None:
        """Index the ids of sites and items."""
        self.calendar = calendar
        network = calendar.network
        self.sites = {site.id: place for place, site in enumerate(network.sites)}
        self.items = {item.id: place for place, item in enumerate(network.items)}

    def plan_lines(
        self, documents: Sequence[Mapping[str, Any]], findings: Findings
    ) -> list[PlanLine] | None:
        """Return the plan lines with names found; None if one of them names what is not there."""
        moving = [line for line in documents if line["lane"] is not None]
        rows = iter(
            self.calendar.rows(
                [line["lane"] for line in moving], [line.get("departs") for line in moving]
            )
        )
        lines = []
        seen: set[tuple[int, int, int]] = set()
        sound = True
        for position, line in enumerate(documents):
            place = f"/plan_lines/{position}"
            row = -1 if line["lane"] is None else next(rows)
            origin = self.sites.get(line["origin"], -1)
            destination = self.sites.get(line["destination"], -1)
            item = self.items.get(line["item"], -1)
            unknown = min(origin, destination, item) < 0 or (row < 0 and line["lane"] is not None)
            if unknown or not self.calendar.is_dated(line, row):
                findings.add("name_unknown", "a plan line names what is not there", place=place)
                sound = False
                continue
            key = (row, item, origin if row < 0 else -1)
            if key in seen:
                findings.add("listed_twice", "a plan line for the same lane and item", place=place)
                sound = False
            seen.add(key)
            lines.append(PlanLine(place, row, item, origin, destination, line))
        return lines if sound else None


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
    on_lanes = _lane_flow(arcs, lines, findings)
    stated = _stated(arcs, proof, names, findings)
    if on_lanes is None or stated is None:
        return None
    places, steps = on_lanes
    nodes = len(arcs.nodes)
    inflow: list[int] = sums_at(nodes, arcs.lane_head[places], steps).tolist()
    outflow: list[int] = sums_at(nodes, arcs.lane_tail[places], steps).tolist()
    flow = [arc.minimum if arc.kind == "want" else 0 for arc in arcs.arcs]
    for position, amount in stated.items():
        flow[position] = amount
    _follow(arcs, flow, inflow=inflow, outflow=outflow)
    others = whole(flow)
    # Zeros that nobody writes to take no memory: few lanes carry anything.
    wide = object in (steps.dtype, others.dtype)
    result: Whole = np.zeros(len(arcs.rows) + len(others), dtype=object if wide else np.int64)
    result[places] = steps
    result[len(arcs.rows) :] = others
    return result


def _follow(
    arcs: ItemArcs,
    flow: list[int],
    *,
    inflow: list[int],
    outflow: list[int],
) -> None:
    """Put into ``flow`` what follows from lanes and stated flows at supply, entry and exit.

    ``inflow`` and ``outflow`` are what lanes bring to each node and take from it.
    """
    handled = []
    shelves = _shelves(arcs, flow)
    for position, arc in enumerate(arcs.arcs):
        if arc.kind == "draw":
            inflow[arc.head] += flow[position]
        elif arc.kind in {"pass", "store"}:
            # The node before a pass is a received one, of whose outflow nothing is asked.
            outflow[arc.tail] += flow[position]
            outflow[arc.head] -= flow[position]
        elif arc.kind == "enter":
            flow[position] = inflow[arc.tail]
            inflow[arc.head] += inflow[arc.tail]
        elif arc.kind == "handle":
            handled.append(position)
    for position, arc in enumerate(arcs.arcs):
        if arc.kind == "leave":
            flow[position] = outflow[arc.head]
        elif arc.kind == "supply":
            flow[position] = shelves.get(arc.head, 0)
    for position in handled:
        flow[position] = inflow[arcs.arcs[position].tail]


def _shelves(arcs: ItemArcs, flow: Sequence[int]) -> dict[int, int]:
    """Return what leaves each shelf: what is drawn from it and what is kept."""
    leaves: dict[int, int] = {}
    for steps, arc in zip(flow, arcs.arcs, strict=True):
        if steps and arc.kind in {"draw", "keep"}:
            leaves[arc.tail] = leaves.get(arc.tail, 0) + steps
    return leaves


def _lane_flow(
    arcs: ItemArcs, lines: Sequence[PlanLine], findings: Findings
) -> tuple[Positions, Whole] | None:
    """Return lanes that carry something and their flow; None where a plan line does not say it."""
    rows = np.array([line.row for line in lines], dtype=np.int64)
    places = np.searchsorted(arcs.rows, rows)
    usable = np.zeros(len(rows), dtype=np.bool_)
    inside = places < len(arcs.rows)
    usable[inside] = arcs.rows[places[inside]] == rows[inside]
    steps = numbers([line.document["quantity"] for line in lines]).in_steps(arcs.step)
    for line, known, quantity in zip(lines, usable.tolist(), steps, strict=True):
        if not known:
            findings.add("name_unknown", "the item cannot use this lane", place=line.place)
        if quantity is None:
            findings.add("quantity_wrong", "no whole number of steps above 0", place=line.place)
    if None in steps or not usable.all():
        return None
    return places, whole([quantity or 0 for quantity in steps])


# Where a certificate lists the flow of each kind of arc, and what tells one from another there.
_TABLES: tuple[tuple[str, str, tuple[str, ...]], ...] = (
    ("draws", "draw", ("tier",)),
    ("kept", "keep", ("tier",)),
    ("serves", "serve", ("group", "from", "origin")),
    ("passes", "pass", ("origin",)),
    ("stored", "store", ()),
    ("shortages", "short", ("group",)),
)


def _stated(
    arcs: ItemArcs, proof: Mapping[str, Any], names: Names, findings: Findings
) -> dict[int, int] | None:
    """Return the flows that the certificate lists, by position of their arc; None if wrong."""
    known: dict[str, dict[tuple[object, ...], int]] = {kind: {} for _, kind, _ in _TABLES}
    for position, arc in enumerate(arcs.arcs):
        if arc.kind in known:
            known[arc.kind][arc.key] = position
    flows: dict[int, int] = {}
    sound = True
    for table, kind, fields in _TABLES:
        entries = proof.get(table, ())
        steps = numbers([entry["quantity"] for entry in entries]).in_steps(arcs.step)
        sites = [names.sites.get(entry["site"], -1) for entry in entries]
        named = [(*fields, "day") if "day" in entry else fields for entry in entries]
        keys = (
            (site, *(entry[field] for field in own))
            for site, entry, own in zip(sites, entries, named, strict=True)
        )
        for position, (key, quantity) in enumerate(zip(keys, steps, strict=True)):
            at = known[kind].get(key)
            if at is not None and quantity is not None and at not in flows:
                flows[at] = quantity
                continue
            sound = False
            place = f"/items/{proof['item']}/{table}/{position}"
            if at is None:
                findings.add("name_unknown", "there is no such arc", place=place)
            elif at in flows:
                findings.add("listed_twice", "a flow is stated twice", place=place)
            if quantity is None:
                findings.add("quantity_wrong", "no whole number of steps above 0", place=place)
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
