"""The formal network, node by node and arc by arc, for sites of every kind.

Each network has one peculiarity; the arcs that it must have are written down here from the text
of the format, as (kind, tail, head, least, most, money of one step).
"""

from service.network.options import Options
from tests.unit.proof.by_hand import network_from
from tests.unit.proof.formal import arcs_of, body, text, written


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
