"""Ways to spoil the plan and proof from paper, each with the code that must name it."""

from collections.abc import Callable
from typing import Any

from tests.unit.proof.by_hand import Document, documents

Edit = Callable[[Document, Document], object]


def _set(document: str, *place: str | int, to: Any) -> Edit:  # noqa: ANN401 - any JSON
    """Return an edit that sets one place of ``plan`` or ``certificate``."""

    def edit(plan: Document, certificate: Document) -> None:
        holder: Any = plan if document == "plan" else certificate
        for key in place[:-1]:
            holder = holder[key]
        holder[place[-1]] = to

    return edit


def _all(*edits: Edit) -> Edit:
    """Return the edits one after the other."""

    def edit(plan: Document, certificate: Document) -> None:
        for one in edits:
            one(plan, certificate)

    return edit


def _in_proof(*place: str | int, to: Any) -> Edit:  # noqa: ANN401 - any JSON
    """Return an edit of the only item's proof."""
    return _set("certificate", "items", 0, *place, to=to)


# More than one case of a code: name, code, edit. The code must be among those found.
CASES: tuple[tuple[str, str, Edit], ...] = (
    ("unknown key", "plan_malformed", _set("plan", "zebra", to=1)),
    ("missing key", "plan_malformed", lambda plan, _: plan.pop("warnings")),
    ("number for text", "plan_malformed", _set("plan", "total_cost", to=39)),
    ("exponent", "plan_malformed", _set("plan", "total_cost", to="39e0")),
    ("another format", "plan_malformed", _set("plan", "format", to=2)),
    ("true for one", "plan_malformed", _set("plan", "format", to=True)),
    ("a gap", "bound_wrong", _set("certificate", "gap", to="1")),
    ("a price as number", "certificate_malformed", _in_proof("prices", 0, "price", to=195)),
    ("an unknown side", "certificate_malformed", _in_proof("prices", 0, "side", to="up")),
    ("other network", "digest_mismatch", _set("plan", "network_digest", to="sha-256:" + "0" * 64)),
    (
        "other options",
        "digest_mismatch",
        _set("certificate", "options_digest", to="sha-256:" + "0" * 64),
    ),
    (
        "other summary",
        "digest_mismatch",
        _set("plan", "certificate", "network_digest", to="sha-256:" + "0" * 64),
    ),
    ("other cut-off", "plan_head", _set("plan", "cut_off", to="2026-02-04T16:00:00+01:00")),
    ("other currency", "plan_head", _set("certificate", "currency", to="EUR")),
    ("unknown lane", "name_unknown", _set("plan", "plan_lines", 0, "lane", to="9Z")),
    ("unknown item", "name_unknown", _set("plan", "plan_lines", 0, "item", to="SAND")),
    ("unknown tier", "name_unknown", _in_proof("draws", 0, "tier", to=2)),
    ("unknown group", "name_unknown", _in_proof("serves", 0, "group", to="B")),
    ("unknown node", "name_unknown", _in_proof("prices", 0, "side", to="sent")),
    ("item without proof", "name_unknown", _set("certificate", "items", to=[])),
    (
        "lane twice",
        "listed_twice",
        lambda plan, _: plan["plan_lines"].append(dict(plan["plan_lines"][0])),
    ),
    (
        "draw twice",
        "listed_twice",
        lambda _, certificate: certificate["items"][0]["draws"].append(
            {"site": "D1", "tier": 1, "quantity": "1"}
        ),
    ),
    (
        "price twice",
        "listed_twice",
        lambda _, certificate: certificate["items"][0]["prices"].append(
            {"site": "D1", "side": "in", "qualifier": None, "price": "195"}
        ),
    ),
    ("half a step", "quantity_wrong", _set("plan", "plan_lines", 0, "quantity", to="4.5")),
    ("nothing listed", "quantity_wrong", _in_proof("shortages", 0, "quantity", to="0")),
    ("below nothing", "quantity_wrong", _in_proof("draws", 0, "quantity", to="-1")),
    ("more than there is", "limit_broken", _in_proof("draws", 0, "quantity", to="11")),
    ("one lost", "not_conserved", _set("plan", "plan_lines", 0, "quantity", to="4")),
    ("one unsaid", "not_conserved", _in_proof("shortages", to=[])),
    ("negative scale", "cost_scale_wrong", _set("certificate", "cost_scale", to="-1")),
    ("fractions left", "cost_scale_wrong", _set("certificate", "cost_scale", to="1/2")),
    ("base below", "weights_too_small", _in_proof("base", to="198")),
    (
        "price unsaid",
        "price_missing",
        lambda _, certificate: certificate["items"][0]["prices"].pop(),
    ),
    ("price of another", "not_optimal", _in_proof("prices", 0, "price", to="190")),
    ("shortage achieved", "bound_wrong", _set("certificate", "steps", 1, "achieved", to="1")),
    ("bound below", "bound_wrong", _set("certificate", "steps", 2, "bound", to="38")),
    ("step unsaid", "bound_wrong", lambda _, certificate: certificate["steps"].pop(0)),
    ("total of the proof", "bound_wrong", _set("certificate", "total_cost", to="40")),
    ("summary", "bound_wrong", _set("plan", "certificate", "lower_bound", to="40")),
    ("unit cost", "plan_line_wrong", _set("plan", "plan_lines", 0, "unit_cost", to="3")),
    ("line total", "plan_line_wrong", _set("plan", "plan_lines", 0, "cost", to="11")),
    ("cost of stock", "plan_line_wrong", _set("plan", "plan_lines", 0, "supply_cost", to="1")),
    ("handling", "plan_line_wrong", _set("plan", "plan_lines", 0, "handling_cost", to="1")),
    ("ends", "plan_line_wrong", _set("plan", "plan_lines", 0, "destination", to="YB")),
    ("order of lines", "plan_line_wrong", lambda plan, _: plan["plan_lines"].reverse()),
    ("total", "total_wrong", _set("plan", "total_cost", to="40")),
    ("part", "total_wrong", _set("plan", "cost_parts", "handling", to="1")),
    ("rounded", "total_wrong", _set("plan", "total_cost_rounded", to="39.01")),
    ("other decimals", "total_wrong", _set("plan", "total_cost_rounded", to="39.0")),
    ("difference", "total_wrong", _set("plan", "rounding_difference", to="0.01")),
    ("complete", "total_wrong", _set("plan", "totals", "lines_complete", to=2)),
    ("set aside", "total_wrong", _set("plan", "set_aside", to=[{}])),
    ("weight", "total_wrong", _set("plan", "totals", "quantities", 0, "weight_kg", to="unknown")),
    ("quantities", "total_wrong", _set("plan", "totals", "quantities", to=[])),
    ("other priority", "order_line_wrong", _set("plan", "order_lines", 0, "priority", to=2)),
    ("other quantity", "order_line_wrong", _set("plan", "order_lines", 0, "quantity", to="9")),
    ("tags made up", "order_line_wrong", _set("plan", "order_lines", 0, "tags", to=["x"])),
    ("line unsaid", "order_line_wrong", lambda plan, _: plan["order_lines"].pop()),
    ("lines exchanged", "order_line_wrong", lambda plan, _: plan["order_lines"].reverse()),
    (
        "source twice",
        "order_line_wrong",
        _all(
            _set(
                "plan",
                "order_lines",
                0,
                "sources",
                1,
                to=documents()[0]["order_lines"][0]["sources"][0],
            ),
            _set("plan", "order_lines", 0, "served", to="10"),
        ),
    ),
    (
        "less than the flow",
        "order_line_wrong",
        _all(
            _set("plan", "order_lines", 1, "served", to="4"),
            _set("plan", "order_lines", 1, "short", to="3"),
            _set("plan", "order_lines", 1, "sources", 0, "quantity", to="4"),
        ),
    ),
    (
        "other origin",
        "route_wrong",
        _set("plan", "order_lines", 0, "sources", 0, "origin", to="D2"),
    ),
    ("no legs", "route_wrong", _set("plan", "order_lines", 0, "sources", 0, "legs", to=[])),
    (
        "an empty lane",
        "route_wrong",
        _set("plan", "order_lines", 1, "sources", 0, "legs", to=[{"lane": "2B"}]),
    ),
    (
        "a leg too many",
        "route_wrong",
        _set("plan", "order_lines", 0, "sources", 0, "legs", to=[{"lane": "1A"}, {"lane": "1A"}]),
    ),
    ("lot", "lot_wrong", _set("plan", "order_lines", 0, "sources", 0, "lot", to="L2")),
    (
        "another lane",
        "lane_use_wrong",
        _all(
            _set("plan", "order_lines", 0, "sources", 0, "quantity", to="4"),
            _set("plan", "order_lines", 0, "sources", 1, "quantity", to="4"),
        ),
    ),
    ("shortage unsaid", "shortage_wrong", _set("plan", "shortages", to=[])),
    ("shortage", "shortage_wrong", _set("plan", "shortages", 0, "quantity", to="1")),
    ("kept", "shortage_wrong", _set("plan", "shortages", 0, "kept", to=True)),
    ("weight on a lane", "consignment_wrong", _set("plan", "consignments", 0, "weight_kg", to="1")),
    ("pallets", "consignment_wrong", _set("plan", "consignments", 0, "pallets", to="0")),
    ("lane unsaid", "consignment_wrong", lambda plan, _: plan["consignments"].pop()),
    (
        "references",
        "consignment_wrong",
        _set("plan", "consignments", 0, "order_references", to=["A", "B"]),
    ),
    ("stock", "site_use_wrong", _set("plan", "site_use", 0, "left", to="1")),
    ("stock unsaid", "site_use_wrong", lambda plan, _: plan["site_use"].pop()),
    (
        "a rule made up",
        "rules_wrong",
        _set(
            "plan",
            "rules_in_force",
            to=[
                {
                    "rule": "closure",
                    "id": "r",
                    "note": None,
                    "owner": None,
                    "applied": True,
                    "binding": False,
                }
            ],
        ),
    ),
)
