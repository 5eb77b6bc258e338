"""Every way in which a plan can be wrong is found, by name, by both verifiers."""

from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
import orjson
import pytest

from service.network.columns import Decimals, Network, Texts
from service.proof.check import check
from service.proof.violations import CODES, EXAMPLES_MAX, Findings
from tests.evidence.test_verifiers_agree import both_verdicts
from tests.evidence.zips import entries_of, packed, repacked, with_network
from tests.unit.proof.by_hand import NETWORK, OPTIONS, Document, documents

Edit = Callable[[Document, Document], object]


def test_plan_and_proof_from_paper_are_accepted() -> None:
    """No planning code had a hand in them."""
    assert check(NETWORK, OPTIONS, *documents()) == ()


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
    ("a gap", "certificate_malformed", _set("certificate", "gap", to="1")),
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


@pytest.mark.parametrize(("name", "code", "edit"), CASES, ids=[f"{c}: {n}" for n, c, _ in CASES])
def test_what_is_wrong_is_named(name: str, code: str, edit: Edit, tmp_path: Path) -> None:
    """The checker finds it, and so does the verifier that was written separately."""
    plan, certificate = documents()
    edit(plan, certificate)

    found = {violation.code for violation in check(NETWORK, OPTIONS, plan, certificate)}
    data = packed(NETWORK, OPTIONS, orjson.dumps(plan), orjson.dumps(certificate))
    verdict, codes = both_verdicts(data, tmp_path)

    assert code in found, (name, found)
    assert (verdict, codes) == ("broken", found)


def test_dearer_plan_is_found_not_optimal() -> None:
    """Two sacks of the second depot go to B: everything adds up, and it costs 8 more.

    2A carries 1, 2B 2, 1A 7, 1B 3: 3 + 18 + 14 + 12 = 47, against 39.
    """
    plan, certificate = documents()
    lines = {"1A": ("7", "14"), "1B": ("3", "12"), "2A": ("1", "3")}
    for line in plan["plan_lines"]:
        line["quantity"], line["transport_cost"] = lines[line["lane"]]
        line["cost"] = line["transport_cost"]
    plan["plan_lines"].append(
        plan["plan_lines"][2]
        | {"lane": "2B", "destination": "YB", "quantity": "2", "unit_cost": "9"}
        | {"transport_cost": "18", "cost": "18"}
    )

    found = check(NETWORK, OPTIONS, plan, certificate)

    codes = {violation.code for violation in found}
    assert "not_optimal" in codes
    assert not codes & {"not_conserved", "limit_broken", "weights_too_small"}


def test_serving_the_later_priority_first_is_found_not_optimal() -> None:
    """A gives B two sacks: both are short by what the other gains, which weights forbid."""
    plan, certificate = documents()
    proof = certificate["items"][0]
    proof["serves"][0]["quantity"], proof["serves"][1]["quantity"] = "6", "7"
    proof["shortages"] = [{"site": "YA", "group": "A", "quantity": "2"}]
    plan["plan_lines"][0]["quantity"], plan["plan_lines"][1]["quantity"] = "3", "7"

    codes = {violation.code for violation in check(NETWORK, OPTIONS, plan, certificate)}

    assert {"not_optimal", "bound_wrong"} <= codes
    assert not codes & {"not_conserved", "limit_broken"}


def _step_of_two(network: Network) -> Network:
    """Make order line B, which wants 7, off the step."""
    return replace(network, items=(replace(network.items[0], step=Fraction(2)),))


def _must_above_can(network: Network) -> Network:
    """Let 3 have to go on the first lane, where 2 can."""
    first = np.array([True, False, False, False])
    lanes = replace(
        network.lanes,
        must_ship=Decimals(values=first * np.int64(3), present=first, exponent=0),
        capacity=Decimals(values=first * np.int64(2), present=first, exponent=0),
    )
    return replace(network, lanes=lanes)


def _fixed_twice(network: Network) -> Network:
    """Fix the first lane at 1 and at 2."""
    rules = [
        {"rule": "fixed_quantity", "id": name, "lanes": {"ids": ["1A"]}, "quantity": quantity}
        for name, quantity in (("a", "1"), ("b", "2"))
    ]
    return replace(network, head={**network.head, "rules": rules})


def _pallets_unknown(network: Network) -> Network:
    """State the cost of lanes by a pallet that the item does not have; its lanes take any item."""
    any_item = np.full(len(network.lanes), -1, dtype=np.int32)
    measure = Texts(codes=np.zeros(len(network.lanes), dtype=np.int32), values=("pallet",))
    return replace(network, lanes=replace(network.lanes, item=any_item, measure=measure))


@pytest.mark.parametrize("forge", [_step_of_two, _must_above_can, _fixed_twice, _pallets_unknown])
def test_network_that_cannot_be_planned_is_named(
    forge: Callable[[Network], Network], tmp_path: Path
) -> None:
    """A forger can pack what the intake would have refused; both verifiers refuse it too."""
    sound = entries_of(packed(NETWORK, OPTIONS, *map(orjson.dumps, documents())))

    verdict, codes = both_verdicts(repacked(with_network(sound, forge(NETWORK))), tmp_path)

    assert verdict == "broken"
    assert "network_unusable" in codes


def test_codes_are_all_produced_by_some_test() -> None:
    """A code that no test produces may be one that nothing can: here, or named where it is."""
    here = {code for _, code, _ in CASES} | {"network_unusable"}
    elsewhere = {
        # tests/unit/proof/test_evidence.py
        "zip_unreadable",
        "manifest_malformed",
        "entry_missing",
        "entry_unknown",
        "entry_changed",
        "network_malformed",
        "options_malformed",
        "history_malformed",
        "event_hash",
        "event_chain",
        "event_payload",
        # tests/unit/proof/test_cuts.py
        "cut_wrong",
    }

    assert here | elsewhere == set(CODES)
    assert not here & elsewhere


def test_findings_are_counted_but_few_are_kept() -> None:
    """A million wrong lines must not become a million sentences; an unknown code is our mistake."""
    findings = Findings()
    for _ in range(1_000):
        findings.add("not_optimal", "again")

    assert len(findings.violations()) == EXAMPLES_MAX
    with pytest.raises(KeyError):
        findings.add("zebra", "no such code")
