"""The formal network, node by node and arc by arc, for sites of every kind.

Each network has one peculiarity; the arcs that it must have are written down here from the text
of the format, as (kind, tail, head, least, most, money of one step).
"""

from fractions import Fraction
from typing import Any

import pytest

from service.network.columns import Network
from service.network.options import Options
from service.proof.arcs import ItemArcs, item_arcs, scaled_costs
from service.proof.rulings import Rulings, UnusableNetworkError
from tests.factories import network_document
from tests.unit.proof.by_hand import Document, network_from

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
            Fraction(int(costs[at]), 1_000_000),
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


def test_joined_sites_have_in_and_out() -> None:
    """Depot, cross-dock with a yard of its own, and yard, as in most networks."""
    assert written(network_from(body())) == {
        text("draw", "root", "D in", 0, 100, 3),
        text("handle", "D in", "D out", 0, -1, "0.5"),
        text("lane", "D out", "X in", 0, -1, 1),
        text("handle", "X in", "X out", 0, -1, "0.25"),
        text("serve", "X out", "X demand B"),
        text("lane", "X out", "Y in", 0, -1, 2),
        text("handle", "Y in", "Y out"),
        text("serve", "Y out", "Y demand A"),
        text("want", "Y demand A", "root", 7, 7),
        text("want", "X demand B", "root", 5, 5),
        text("short 1", "root", "Y demand A"),
        text("short 2", "root", "X demand B"),
    }


def test_forbidden_shortages_have_no_arcs() -> None:
    """Then what is wanted is hard."""
    arcs = written(network_from(body()), Options(shortages="forbid"))

    assert not any(arc[0].startswith("short") for arc in arcs)


def test_kept_stock_is_wanted_behind_its_tiers() -> None:
    """Two tiers, each with a node; 10.5 kept is 10 steps, of priority 3, so that A is the first.

    What stays costs nothing: the cost of a tier is paid when its goods leave it.
    """
    supply = [
        {"site": "D", "item": "SALT", "quantity": "60", "unit_cost": "4"},
        {
            "site": "D",
            "item": "SALT",
            "quantity": "40",
            "keep": {"quantity": "10.5", "priority": 3},
        },
    ]

    arcs = written(network_from(body(supply=supply)))

    assert {arc for arc in arcs if "stock" in arc[1] + arc[2] or "keep" in arc[1] + arc[2]} == {
        text("supply", "root", "D stock 1", 0, 40),
        text("supply", "root", "D stock 2", 0, 60),
        text("draw", "D stock 1", "D in", 0, -1, 0),
        text("draw", "D stock 2", "D in", 0, -1, 4),
        text("keep", "D stock 1", "D keep"),
        text("keep", "D stock 2", "D keep"),
        text("want", "D keep", "root", 10, 10),
        text("short 2", "root", "D keep"),
    }
    assert text("short 1", "root", "Y demand A") in arcs
    assert text("short 3", "root", "X demand B") in arcs


def test_kept_stock_below_a_step_is_none() -> None:
    """0.9 of a sack is no sack: no node, and its priority does not count."""
    supply = [
        {
            "site": "D",
            "item": "SALT",
            "quantity": "40",
            "keep": {"quantity": "0.9", "priority": 1},
        },
    ]

    arcs = arcs_of(network_from(body(supply=supply)))

    assert arcs.priorities == (2, 4)
    assert not any(node.side in ("keep", "stock") for node in arcs.nodes)


def test_running_sums_are_rounded_not_rows() -> None:
    """0.6 + 0.6 + 0.9 at costs 1, 1, 2: sums 0.6, 1.2, 2.1, so 0 + 1 steps, and 1 dearer one."""
    supply = [
        {"site": "D", "item": "SALT", "quantity": quantity, "unit_cost": cost}
        for quantity, cost in (("0.6", "1"), ("0.6", "1"), ("0.9", "2"))
    ]

    arcs = arcs_of(network_from(body(supply=supply)))

    assert arcs.stock[0].tier_steps == (1, 1)
    assert [row.steps for row in arcs.stock[0].rows] == [0, 1, 1]


def test_depot_that_may_not_pass_goods_on_is_apart() -> None:
    """Y gets stock and a lane of its own: what arrives serves the yard, what it has may leave."""
    tables = body(
        sites=[
            {"id": "D", "roles": ["warehouse"], "handling_cost": "0.5"},
            {"id": "X", "roles": ["cross_dock", "ship_to"], "handling_cost": "0.25"},
            {"id": "Y", "roles": ["ship_to", "warehouse"], "handling_cost": "0.125"},
        ]
    )
    tables["supply"].append({"site": "Y", "item": "SALT", "quantity": "9"})
    tables["lanes"].append({"origin": "Y", "destination": "X", "unit_cost": "6"})

    arcs = written(network_from(tables))

    assert {arc for arc in arcs if "Y" in arc[1] + arc[2]} == {
        text("draw", "root", "Y in", 0, 9, 0),
        text("handle", "Y in", "Y out", 0, -1, "0.125"),
        text("leave", "Y out", "Y sent"),
        text("lane", "Y sent", "X in", 0, -1, 6),
        text("serve", "Y out", "Y demand A"),
        text("lane", "X out", "Y received", 0, -1, 2),
        text("serve", "Y received", "Y demand A", 0, -1, "0.125"),
        text("want", "Y demand A", "root", 7, 7),
        text("short 1", "root", "Y demand A"),
    }


def test_order_line_with_origins_takes_only_what_comes_from_them() -> None:
    """X is a cross-dock with stock behind it in D alone: X may bring what D may; E may not."""
    tables = body(
        sites=[
            {"id": "D", "roles": ["warehouse"], "handling_cost": "0.5"},
            {"id": "E", "roles": ["warehouse"]},
            {"id": "X", "roles": ["cross_dock", "ship_to"], "handling_cost": "0.25"},
            {"id": "Y", "roles": ["ship_to"], "handling_cost": "0.125"},
        ]
    )
    tables["supply"].append({"site": "E", "item": "SALT", "quantity": "1"})
    tables["lanes"].append({"origin": "E", "destination": "Y", "unit_cost": "9"})
    tables["demand"][0]["origins"] = ["D"]
    tables["demand"].append(
        {"reference": "C", "site": "Y", "item": "SALT", "quantity": "2", "priority": 2}
    )

    arcs = written(network_from(tables))

    assert {arc for arc in arcs if arc[0] in ("serve", "lane") and "Y" in arc[2]} == {
        text("lane", "X out", "Y received X", 0, -1, 2),
        text("lane", "E out", "Y received E", 0, -1, 9),
        text("serve", "Y received X", "Y demand A", 0, -1, "0.125"),
        text("serve", "Y received X", "Y demand C", 0, -1, "0.125"),
        text("serve", "Y received E", "Y demand C", 0, -1, "0.125"),
        text("serve", "Y out", "Y demand C"),
    }


def test_cross_dock_with_origins_passes_goods_around_its_order_lines() -> None:
    """X wants only from D, which is all there is; what it passes on is handled on that way."""
    tables = body()
    tables["demand"][1]["origins"] = ["D"]

    arcs = written(network_from(tables))

    assert {arc for arc in arcs if "X" in arc[1] + arc[2]} == {
        text("lane", "D out", "X received D", 0, -1, 1),
        text("pass", "X received D", "X sent", 0, -1, "0.25"),
        text("serve", "X received D", "X demand B", 0, -1, "0.25"),
        text("handle", "X in", "X out", 0, -1, "0.25"),
        text("leave", "X out", "X sent"),
        text("lane", "X sent", "Y in", 0, -1, 2),
        text("want", "X demand B", "root", 5, 5),
        text("short 2", "root", "X demand B"),
    }


@pytest.mark.parametrize(
    ("flow", "expected"),
    [
        ("through", {("handle", "X in", "X out", 0, 2, Fraction(1, 4))}),
        (
            "received",
            {
                ("lane", "D out", "X received", 0, -1, Fraction(1)),
                ("enter", "X received", "X in", 0, 2, Fraction(0)),
            },
        ),
        (
            "sent",
            {
                ("leave", "X out", "X sent", 0, 2, Fraction(0)),
                ("lane", "X sent", "Y in", 0, -1, Fraction(2)),
            },
        ),
    ],
)
def test_throughput_limits_are_steps_rounded_down(flow: str, expected: set[Written]) -> None:
    """At most 74 kg of sacks of 25 kg are 2 sacks; the rule of 90 kg on the same site is weaker."""
    rules = [
        {
            "rule": "throughput",
            "id": name,
            "sites": {"ids": ["X"]},
            "flow": flow,
            "measure": "weight_kg",
            "maximum": maximum,
        }
        for name, maximum in (("a", "90"), ("b", "74"))
    ]

    assert expected <= written(network_from(body(rules=rules)))


def test_closed_site_passes_nothing() -> None:
    """Its lanes are shut, and so is the way through it, for the days of the rule only."""
    rule = {"rule": "closure", "id": "a", "sites": {"ids": ["X"]}, "until": "2026-02-03"}
    shut = written(network_from(body(rules=[rule])))
    over = written(network_from(body(rules=[rule | {"until": "2026-02-02"}])))

    assert {
        text("lane", "D out", "X in", 0, 0, 1),
        text("lane", "X out", "Y in", 0, 0, 2),
        text("handle", "X in", "X out", 0, 0, "0.25"),
    } <= shut
    assert over == written(network_from(body()))


def test_limits_of_lanes_are_turned_into_steps() -> None:
    """1.5 pallets of 48 are 72 sacks; a pallet costs 96, so a sack 2; 48 sacks must go."""
    lane = {
        "origin": "X",
        "destination": "Y",
        "measure": "pallet",
        "unit_cost": "96",
        "capacity": "1.501",
        "must_ship": "1",
    }
    tables = body()

    arcs = written(network_from(body(lanes=[tables["lanes"][0], lane])))

    assert text("lane", "X out", "Y in", 48, 72, 2) in arcs


def test_fixed_quantity_is_least_and_most_and_gives_way_to_a_closure() -> None:
    """A closed lane carries nothing, whatever was fixed there."""
    fixed = {"rule": "fixed_quantity", "id": "a", "lanes": {"origin": ["X"]}, "quantity": "4"}
    shut = {"rule": "closure", "id": "b", "lanes": {"destination": ["Y"]}}

    assert text("lane", "X out", "Y in", 4, 4, 2) in written(network_from(body(rules=[fixed])))
    assert text("lane", "X out", "Y in", 0, 0, 2) in written(
        network_from(body(rules=[fixed, shut]))
    )


def test_lines_alike_are_one_group_under_the_first_reference() -> None:
    """Two lines of priority 2 want together; one in money is apart; one of nothing is in none."""
    tables = body()
    tables["demand"] += [
        {"reference": "0", "site": "Y", "item": "SALT", "quantity": "3", "priority": 2},
        {"reference": "M", "site": "Y", "item": "SALT", "quantity": "1", "shortage_cost": "8"},
        {"reference": "Z", "site": "Y", "item": "SALT", "quantity": "0", "priority": 9},
    ]

    arcs = written(network_from(tables))

    assert text("want", "Y demand 0", "root", 10, 10) in arcs
    assert text("short", "root", "Y demand M", 0, -1, 8) in arcs
    assert not any("Z" in arc[1] for arc in arcs)
    assert arcs_of(network_from(tables)).priorities == (2, 4)


def test_option_gives_money_to_lines_that_name_nothing() -> None:
    """A priority that is stated stays one; the default of 5 gives way to what a sack is worth."""
    tables = body()
    del tables["demand"][1]["priority"]
    options = Options(worth_at_most=Fraction(6))

    arcs = written(network_from(tables), options)

    assert text("short", "root", "X demand B", 0, -1, 6) in arcs
    assert text("short 1", "root", "Y demand A") in arcs


@pytest.mark.parametrize(("rounding", "steps"), [("up", 8), ("down", 7)])
def test_order_lines_are_rounded_as_the_options_say(rounding: Any, steps: int) -> None:  # noqa: ANN401 - a literal
    """7.5 sacks are 8 or 7; refused, the network cannot be planned."""
    tables = body()
    tables["demand"][0]["quantity"] = "7.5"
    network = network_from(tables, Options(demand_rounding=rounding))

    assert text("want", "Y demand A", "root", steps, steps) in written(
        network, Options(demand_rounding=rounding)
    )
    with pytest.raises(UnusableNetworkError, match="off the step"):
        arcs_of(network)


def test_lane_of_any_item_is_used_where_stock_can_come_and_is_wanted() -> None:
    """The second item has stock at Z, which no lane leaves, and nobody wants it: it uses none."""
    tables = body()
    tables["items"] = [*tables["items"], {"id": "SAND", "unit": "sack"}]
    tables["sites"] = [*tables["sites"], {"id": "Z", "roles": ["warehouse"]}]
    tables["supply"] = [*tables["supply"], {"site": "Z", "item": "SAND", "quantity": "5"}]
    network = network_from(tables)
    items = {item.id: place for place, item in enumerate(network.items)}

    used = {
        name: item_arcs(network, Options(), Rulings.of(network), place).rows.tolist()
        for name, place in items.items()
    }

    assert used == {"SALT": [0, 1], "SAND": []}
