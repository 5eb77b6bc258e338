"""Why there is no plan, in words: what must leave a set of places, and what can come in."""

import numpy as np

from service.network.columns import IntArray, Network
from service.network.naming import lane_names
from service.planning.documents.amounts import Document, text
from service.planning.documents.coupled_reason import coupled_reason, listed
from service.planning.model.arcs import ROOT, SIDES, UNLIMITED, Kind, Side
from service.planning.model.compile import Compiled
from service.planning.model.item_network import ItemNetwork
from service.planning.model.limits import NoCirculationError
from service.planning.solution import Why

NAMES_MAX = 3


def contradiction_reason(compiled: Compiled, why: Why) -> Document:
    """Return the ``reason`` of a network without a plan.

    One row for each item that has none by itself, and one for each circle of items whose shared
    limits contradict each other.
    """
    network = compiled.network
    items = [_item(network, own, cut) for own, cut in why.cuts]
    circles = [coupled_reason(compiled, found) for found in why.contradictions]
    details = " ".join(str(row["detail"]) for row in (items + circles)[:NAMES_MAX])
    rest = len(items) + len(circles) - NAMES_MAX
    more = f" So it is for {rest} more items." if rest > 0 else ""
    reason: Document = {"detail": details + more, "items": items}
    return reason | {"together": circles} if circles else reason


def _item(network: Network, own: ItemNetwork, cut: NoCirculationError) -> Document:
    """Return the contradiction of one item."""
    item = network.items[own.item]
    nodes = own.layout.nodes
    sites = sorted(set(nodes.site[np.flatnonzero(cut.places)].tolist()) - {-1})
    forced, entering = text(cut.forced_out * item.step), text(cut.can_enter * item.step)
    leaving = cut.places[own.arcs.tail] & ~cut.places[own.arcs.head] & (own.arcs.minimum > 0)
    coming = ~cut.places[own.arcs.tail] & cut.places[own.arcs.head] & (own.arcs.capacity > 0)
    must = _words(network, own, np.flatnonzero(leaving))
    can = _words(network, own, np.flatnonzero(coming)) or "nothing"
    if cut.places[ROOT]:
        place = "everything but " + listed(_outside(network, own, cut))
    else:
        place = listed([network.sites[site].id for site in sites])
    return {
        "item": item.id,
        "places": [network.sites[site].id for site in sites],
        "must_leave": forced,
        "can_enter": entering,
        "detail": f"{item.id}: {must} must take {forced} {item.unit} out of {place}, "
        f"but only {entering} can come in ({can}).",
    }


def _outside(network: Network, own: ItemNetwork, cut: NoCirculationError) -> list[str]:
    """Return the ids of the sites with a node outside the set."""
    sites = set(own.layout.nodes.site[np.flatnonzero(~cut.places)].tolist()) - {-1}
    return [network.sites[site].id for site in sorted(sites)]


def _words(network: Network, own: ItemNetwork, arcs: IntArray) -> str:
    """Return what some arcs stand for, in words, the first few of each kind by name."""
    lanes = arcs[own.kind[arcs] == Kind.LANE]
    rows = np.unique(own.lanes.rows[own.subject[lanes]])
    names = [f"lane {name}" for name in lane_names(network, rows)]
    for arc in arcs[own.kind[arcs] != Kind.LANE].tolist():
        kind, subject = Kind(int(own.kind[arc])), int(own.subject[arc])
        if kind == Kind.WANT:
            label = network.demand.reference[own.groups.label[subject]].decode()
            others = int((own.groups.row_group == subject).sum()) - 1
            names.append(f"order line {label}" + (f" and {others} like it" if others else ""))
        elif kind == Kind.SUPPLY:
            names.append(f"stock at {network.sites[own.stock.site[subject]].id}")
        elif kind == Kind.KEEP_WANT:
            names.append(f"stock kept at {network.sites[own.stock.kept_site[subject]].id}")
        elif own.arcs.capacity[arc] != UNLIMITED:
            side = SIDES[own.layout.nodes.side[own.arcs.tail[arc]]]
            what = "arrives at" if side == Side.RECEIVED else "passes"
            site = int(own.layout.nodes.site[own.arcs.tail[arc]])
            names.append(f"what {what} {network.sites[site].id}")
    return listed(list(dict.fromkeys(names)))
