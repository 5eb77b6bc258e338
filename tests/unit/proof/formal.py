"""A depot, a cross-dock and a yard, and their formal network as text and numbers."""

from fractions import Fraction
from typing import Any

from service.network.columns import Network
from service.network.options import Options
from service.proof.arcs import ItemArcs, item_arcs
from service.proof.costs import scaled_costs
from service.proof.rulings import Rulings
from tests.factories import network_document
from tests.unit.proof.by_hand import Document

Written = tuple[str, str, str, int, int, Fraction]


def body(**changes: Any) -> Document:  # noqa: ANN401 - tables of a network
    """Return a depot D, a cross-dock X that also has a yard, and a yard Y behind it."""
    document = network_document(
        items=[{"id": "SALT", "unit": "sack", "weight_kg": "25", "packs": [
            {"unit": "pallet", "contains": "48"}]}],
        sites=[
            {"id": "D", "roles": ["warehouse"], "handling_cost": "0.5"},
            {"id": "X", "roles": ["cross_dock", "ship_to"], "handling_cost": "0.25"},
            {"id": "Y", "roles": ["ship_to"]},
        ],
        supply=[{"site": "D", "item": "SALT", "quantity": "100", "unit_cost": "3"}],
        demand=[
            {"reference": "A", "site": "Y", "item": "SALT", "quantity": "7", "priority": 2},
            {"reference": "B", "site": "X", "item": "SALT", "quantity": "5", "priority": 4},
        ],
        lanes=[
            {"origin": "D", "destination": "X", "unit_cost": "1"},
            {"origin": "X", "destination": "Y", "unit_cost": "2"},
        ],
    )  # fmt: skip
    return document | changes


def arcs_of(network: Network, options: Options | None = None) -> ItemArcs:
    """Return the formal network of the only item."""
    return item_arcs(network, options or Options(), Rulings.of(network), 0)


def written(network: Network, options: Options | None = None) -> set[Written]:
    """Return all arcs as text and numbers, shortage by its rank in place of money."""
    arcs = arcs_of(network, options)

    def name(place: int) -> str:
        node = arcs.nodes[place]
        if node.site < 0:
            return "root"
        qualifier = "" if node.qualifier is None else f" {node.qualifier}"
        return f"{network.sites[node.site].id} {node.side}{qualifier}"

    costs = scaled_costs(network, arcs, Fraction(1_000_000))
    assert costs is not None
    lanes = {
        (
            "lane",
            name(arcs.lane_tail[at]),
            name(arcs.lane_head[at]),
            int(arcs.limits.minimum[at]),
            int(arcs.limits.capacity[at]),
            Fraction(int(costs.lanes[at]), 1_000_000),
        )
        for at in range(len(arcs.rows))
    }
    others = {
        (
            f"{arc.kind} {arc.rank}" if arc.rank else arc.kind,
            name(arc.tail),
            name(arc.head),
            arc.minimum,
            arc.capacity,
            arc.money,
        )
        for arc in arcs.arcs
    }
    return lanes | others


def text(*parts: Any) -> Written:  # noqa: ANN401 - an arc in short
    """Return an arc written in short: money and limits may be left out."""
    kind, tail, head, *numbers = parts
    limits = [*numbers, *(0, -1, 0)[len(numbers) :]]
    return kind, tail, head, limits[0], limits[1], Fraction(limits[2])
