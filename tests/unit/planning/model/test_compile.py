"""The formal network of an item: nodes, arcs, stock tiers, groups and weights, each by hand."""

import tempfile
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import orjson

from service.network.canonical import read_network
from service.network.columns import Network
from service.network.options import read_options
from service.planning.model.arcs import SIDES, Kind
from service.planning.model.compile import compile_network
from service.planning.model.item_network import ItemNetwork
from tests.factories import network_document, take_in

Row = Mapping[str, Any]

SITES: Sequence[Row] = (
    {"id": "W", "roles": ["warehouse"], "handling_cost": "0.5"},
    {"id": "X", "roles": ["cross_dock"]},
    {"id": "Y", "roles": ["ship_to", "warehouse"]},
)


def compiled(  # noqa: PLR0913 - one argument for each table of a network
    *,
    items: Sequence[Row] = ({"id": "GOODS", "unit": "unit"},),
    sites: Sequence[Row] = SITES,
    supply: Sequence[Row] = (),
    demand: Sequence[Row] = (),
    lanes: Sequence[Row] = (),
    rules: Sequence[Row] = (),
    **texts: str,
) -> tuple[Network, ItemNetwork]:
    """Take a network of one item in and return it with the item's formal network."""
    document = network_document(
        items=items,
        sites=sites,
        supply=[{"item": "GOODS", **row} for row in supply],
        demand=[{"item": "GOODS", **row} for row in demand],
        lanes=[{"unit_cost": "1", "item": "GOODS", **row} for row in lanes],
        rules=rules,
    )
    options, _ = read_options(texts)
    assert options is not None
    with tempfile.TemporaryDirectory() as folder:
        report = take_in(orjson.dumps(document), Path(folder), options)
        assert report.status == "accepted", report.faults
        network = read_network(Path(folder) / "network.zip")
    return network, compile_network(network, options).items[0]


def named_arcs(network: Network, own: ItemNetwork, kind: Kind) -> list[tuple[str, str, int]]:
    """Return (tail, head, capacity) of the arcs of one kind, nodes written as site.side.of."""

    def name(node: int) -> str:
        nodes = own.layout.nodes
        side: str = SIDES[nodes.side[node]].value
        if side == "root":
            return side
        qualifier = int(nodes.qualifier[node])
        of = network.sites[qualifier].id if side == "received" and qualifier >= 0 else ""
        site = network.sites[nodes.site[node]].id
        return ".".join([site, side, of] if of else [site, side])

    arcs = own.of_kind(kind)
    return [
        (name(int(tail)), name(int(head)), int(most))
        for tail, head, most in zip(
            own.arcs.tail[arcs], own.arcs.head[arcs], own.arcs.capacity[arcs], strict=True
        )
    ]


def test_joined_sites_handle_once_and_lanes_leave_after_it() -> None:
    """Drawn and received goods join before handling: root -> in -> out -> lane -> in."""
    network, own = compiled(
        supply=[{"site": "W", "quantity": "9"}],
        demand=[{"site": "Y", "quantity": "4"}],
        lanes=[{"origin": "W", "destination": "X"}, {"origin": "X", "destination": "Y"}],
    )

    assert named_arcs(network, own, Kind.SUPPLY) == [("root", "W.in", 9)]
    assert named_arcs(network, own, Kind.THROUGH) == [
        ("W.in", "W.out", -1),
        ("X.in", "X.out", -1),
        ("Y.in", "Y.out", -1),
    ]
    assert named_arcs(network, own, Kind.LANE) == [
        ("W.out", "X.in", -1),
        ("X.out", "Y.in", -1),
    ]
    assert named_arcs(network, own, Kind.SERVE) == [("Y.out", "Y.demand", -1)]
    # Money in halves: 0.5 of handling is 1, a lane is 2.
    assert own.arcs.cost[own.of_kind(Kind.THROUGH)].tolist() == [1, 0, 0]
    assert own.arcs.cost[own.of_kind(Kind.LANE)].tolist() == [2, 2]


def test_stock_of_a_ship_to_does_not_mix_with_what_arrives() -> None:
    """Y has stock, is no cross-dock and is reached: what arrives there serves, and stays."""
    network, own = compiled(
        supply=[{"site": "W", "quantity": "9"}, {"site": "Y", "quantity": "1"}],
        demand=[{"site": "Y", "quantity": "4"}],
        lanes=[{"origin": "W", "destination": "Y"}],
    )

    assert named_arcs(network, own, Kind.LANE) == [("W.out", "Y.received", -1)]
    assert named_arcs(network, own, Kind.SERVE_ARRIVED) == [("Y.received", "Y.demand", -1)]
    assert named_arcs(network, own, Kind.SERVE) == [("Y.out", "Y.demand", -1)]
    assert named_arcs(network, own, Kind.PASS) == []


def test_named_origins_split_arrivals_by_origin() -> None:
    """Only W may serve the second line; X brings W's stock too, so it may as well."""
    network, own = compiled(
        sites=[*SITES, {"id": "V", "roles": ["warehouse"]}],
        supply=[{"site": "W", "quantity": "9"}, {"site": "V", "quantity": "9"}],
        demand=[
            {"reference": "any", "site": "Y", "quantity": "4"},
            {"reference": "W only", "site": "Y", "quantity": "4", "origins": ["W"]},
        ],
        lanes=[
            {"origin": "W", "destination": "X"},
            {"origin": "X", "destination": "Y"},
            {"origin": "V", "destination": "Y"},
        ],
    )

    arcs = own.of_kind(Kind.SERVE_ARRIVED)
    serving = {
        (tail, network.demand.reference[own.groups.label[group]].decode())
        for (tail, _, _), group in zip(
            named_arcs(network, own, Kind.SERVE_ARRIVED),
            own.subject[arcs].tolist(),
            strict=True,
        )
    }
    assert serving == {
        ("Y.received.X", "any"),
        ("Y.received.V", "any"),
        ("Y.received.X", "W only"),
    }


def test_closures_and_limits_of_a_site_become_capacities() -> None:
    """X is closed: its lanes and its way through have capacity 0. W sends 7 at most, not 8."""
    network, own = compiled(
        supply=[{"site": "W", "quantity": "9"}],
        demand=[{"site": "Y", "quantity": "4"}],
        lanes=[
            {"origin": "W", "destination": "X", "must_ship": "2"},
            {"origin": "X", "destination": "Y"},
            {"origin": "W", "destination": "Y", "capacity": "5"},
        ],
        rules=[
            {"rule": "closure", "id": "C", "sites": {"ids": ["X"]}},
            *(
                {
                    "rule": "throughput",
                    "id": most,
                    "sites": {"ids": ["W"]},
                    "flow": "sent",
                    "maximum": most,
                }
                for most in ("7", "8")
            ),
        ],
    )

    assert named_arcs(network, own, Kind.LANE) == [
        ("W.sent", "X.in", 0),
        ("W.sent", "Y.in", 5),
        ("X.out", "Y.in", 0),
    ]
    assert own.arcs.minimum[: len(own.lanes.rows)].tolist() == [0, 0, 0]
    assert ("X.in", "X.out", 0) in named_arcs(network, own, Kind.THROUGH)
    assert named_arcs(network, own, Kind.LEAVE) == [("W.out", "W.sent", 7)]


def test_fixed_quantity_is_minimum_and_capacity_and_a_closure_wins() -> None:
    """2 pallets of 40 move on both lanes, but the second is closed."""
    _, own = compiled(
        items=[{"id": "GOODS", "unit": "bag", "packs": [{"unit": "pallet", "contains": "40"}]}],
        supply=[{"site": "W", "quantity": "90"}],
        demand=[{"site": "Y", "quantity": "90"}],
        lanes=[
            {"id": "one", "origin": "W", "destination": "Y", "measure": "pallet"},
            {"id": "two", "origin": "W", "destination": "Y", "measure": "pallet"},
        ],
        rules=[
            {"rule": "fixed_quantity", "id": "F", "lanes": {"origin": ["W"]}, "quantity": "2"},
            {"rule": "closure", "id": "C", "lanes": {"ids": ["two"]}},
        ],
    )

    assert own.arcs.minimum[:2].tolist() == [80, 0]
    assert own.arcs.capacity[:2].tolist() == [80, 0]
    assert own.lanes.fixed.tolist() == [True, False]


def test_rows_of_equal_cost_are_one_tier_and_sums_are_rounded_down() -> None:
    """Steps of 2. At cost 1: 3 + 2 = 5, 2 steps; at cost 4: 5 + 4 = 9, 4 steps, so 2 more.

    A pallet of 10 at 10 costs 1 a unit too, and stands in the first tier.
    """
    _, own = compiled(
        items=[
            {
                "id": "GOODS",
                "unit": "bag",
                "step": "2",
                "packs": [{"unit": "pallet", "contains": "10"}],
            }
        ],
        supply=[
            {"site": "W", "quantity": "3", "unit_cost": "1", "lot": "A"},
            {"site": "W", "quantity": "0.2", "unit": "pallet", "unit_cost": "10", "lot": "B"},
            {"site": "W", "quantity": "4", "unit_cost": "4"},
        ],
        demand=[{"site": "Y", "quantity": "4"}],
        lanes=[{"origin": "W", "destination": "Y"}],
    )

    assert own.stock.number.tolist() == [1, 2]
    assert own.stock.steps.tolist() == [2, 2]
    assert own.stock.row_steps.tolist() == [1, 1, 2]
    assert [own.stock.money.fraction(tier) for tier in (0, 1)] == [2, 8]


def test_kept_stock_is_wanted_before_it_is_drawn() -> None:
    """Each tier has a node of its own, from which goods are drawn at its cost or kept for 0."""
    network, own = compiled(
        supply=[
            {"site": "W", "quantity": "5", "unit_cost": "1"},
            {
                "site": "W",
                "quantity": "5",
                "unit_cost": "2",
                "keep": {"quantity": "3.9", "priority": 2},
            },
        ],
        demand=[{"site": "Y", "quantity": "4"}],
        lanes=[{"origin": "W", "destination": "Y"}],
    )

    assert named_arcs(network, own, Kind.SUPPLY) == [("root", "W.stock", 5)] * 2
    assert named_arcs(network, own, Kind.DRAW) == [("W.stock", "W.in", -1)] * 2
    assert named_arcs(network, own, Kind.KEPT) == [("W.stock", "W.keep", -1)] * 2
    assert named_arcs(network, own, Kind.KEEP_WANT) == [("W.keep", "root", 3)]
    assert own.priorities == (2, 5)


def test_keeping_less_than_a_step_keeps_nothing() -> None:
    """0.5 of a whole unit is no step: no kept stock, no priority of its own."""
    _, own = compiled(
        supply=[{"site": "W", "quantity": "5", "keep": {"quantity": "0.5", "priority": 1}}],
        demand=[{"site": "Y", "quantity": "4", "priority": 3}],
        lanes=[{"origin": "W", "destination": "Y"}],
    )

    assert own.of_kind(Kind.KEEP_WANT, Kind.KEPT).tolist() == []
    assert own.priorities == (3,)


def test_lines_alike_are_one_group_called_after_the_smallest_reference() -> None:
    """Default priority is 5; 2 pallets of 10 at 30 short each are like 20 bags at 3 each."""
    network, own = compiled(
        items=[{"id": "GOODS", "unit": "bag", "packs": [{"unit": "pallet", "contains": "10"}]}],
        supply=[{"site": "W", "quantity": "5"}],
        demand=[
            {"reference": "B", "site": "Y", "quantity": "1", "priority": 5},
            {"reference": "A", "site": "Y", "quantity": "2"},
            {"reference": "C", "site": "Y", "quantity": "0"},
            {"reference": "D", "site": "Y", "quantity": "2", "unit": "pallet"}
            | {"shortage_cost": "30"},
            {"reference": "E", "site": "Y", "quantity": "20", "shortage_cost": "3"},
            {"reference": "F", "site": "Y", "quantity": "1", "worth_at_most": "3"},
            {"reference": "G", "site": "Y", "quantity": "1", "shortage_cost": "4"},
        ],
        lanes=[{"origin": "W", "destination": "Y"}],
    )

    labels = [network.demand.reference[row].decode() for row in own.groups.label]
    assert labels == ["A", "D", "G"]
    assert own.groups.steps.tolist() == [3, 41, 1]
    assert own.groups.priority.tolist() == [5, 0, 0]
    assert own.groups.row_group.tolist() == [0, 0, -1, 1, 1, 1, 2]


def test_option_puts_a_worth_on_lines_that_name_nothing() -> None:
    """The line with a priority keeps it; the other one competes in money."""
    _, own = compiled(
        supply=[{"site": "W", "quantity": "5"}],
        demand=[
            {"reference": "A", "site": "Y", "quantity": "1"},
            {"reference": "B", "site": "Y", "quantity": "1", "priority": 5},
        ],
        lanes=[{"origin": "W", "destination": "Y"}],
        worth_at_most="2.5",
    )

    assert own.groups.row_priority.tolist() == [0, 5]
    assert own.groups.money.fraction(0) == own.groups.row_money.fraction(0)
    assert float(own.groups.money.fraction(0)) == 2.5


def test_weights_put_every_priority_before_all_money() -> None:
    """Nodes: root, W and Y with in and out, two demands: n = 7. max|c| = 8 (the shortage money).

    C = 2 x 7 x 8 + 1 = 113 (money in halves: 4 is 8, a lane 2, handling 1); the one priority
    weighs C.
    """
    _, own = compiled(
        supply=[{"site": "W", "quantity": "5"}],
        demand=[
            {"reference": "A", "site": "Y", "quantity": "1", "shortage_cost": "4"},
            {"reference": "B", "site": "Y", "quantity": "1", "priority": 9},
        ],
        lanes=[{"origin": "W", "destination": "Y"}],
    )

    assert own.node_count == 7
    assert own.base == 113
    assert own.weighted()[own.of_kind(Kind.SHORT)].tolist() == [8, 113]


def test_forbidden_shortages_have_no_arcs() -> None:
    """What is wanted and kept is then as hard as a minimum."""
    _, own = compiled(
        supply=[{"site": "W", "quantity": "9", "keep": {"quantity": "2", "priority": 1}}],
        demand=[{"site": "Y", "quantity": "1"}],
        lanes=[{"origin": "W", "destination": "Y"}],
        shortages="forbid",
    )

    assert own.of_kind(Kind.SHORT, Kind.KEEP_SHORT).tolist() == []
    assert own.arcs.minimum[own.of_kind(Kind.WANT, Kind.KEEP_WANT)].tolist() == [1, 2]
