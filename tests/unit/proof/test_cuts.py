"""Proofs that there is no plan, on networks where the contradiction can be counted by hand."""

import json
from pathlib import Path
from typing import Any

import orjson
import pytest

from service.network.canonical import canonical_json, digest, network_digest
from service.network.options import Options
from service.proof.check import check
from tests.evidence.test_verifiers_agree import both_verdicts
from tests.evidence.zips import packed
from tests.factories import CUT_OFF, network_document
from tests.unit.proof.by_hand import BODY, Document, network_from

# 15 sacks are wanted and 13 are there: without shortages there is no plan. All places together,
# without the root, must send 15 back to it, and only 13 come out of it.
SCARCE = network_from(BODY)
FORBID = Options(shortages="forbid")

EVERYWHERE = [
    {"site": site, "side": side, "qualifier": name}
    for site, side, name in (
        *(("D1", side, None) for side in ("in", "out")),
        *(("D2", side, None) for side in ("in", "out")),
        ("YA", "demand", "A"),
        *(("YA", side, None) for side in ("in", "out")),
        ("YB", "demand", "B"),
        *(("YB", side, None) for side in ("in", "out")),
    )
]


def documents() -> tuple[Document, Document]:
    """Return plan and certificate of the network without a plan, written by hand."""
    head: Document = {
        "format": 1,
        "method": "min_cost_flow",
        "network_digest": network_digest(SCARCE),
        "options_digest": digest(canonical_json(FORBID.to_document())),
        "currency": "USD",
    }
    tables = ("plan_lines", "order_lines", "consignments", "shortages", "site_use")
    money = ("total_cost", "total_cost_rounded", "rounding_difference", "cost_parts")
    plan: Document = {
        **head,
        "status": "no_plan",
        "method_reasons": [],
        "name": None,
        "cut_off": CUT_OFF,
        "release_by": None,
        **dict.fromkeys(money),
        "totals": {
            "lines_complete": 0,
            "lines_in_part": 0,
            "lines_none": 0,
            "set_aside": 0,
            "quantities": [],
        },
        **{table: [] for table in (*tables, "rules_in_force", "set_aside", "warnings")},
        "reason": {"detail": "15 are wanted and 13 are there"},
        "certificate": {
            "format": 1,
            "feasible": False,
            "lower_bound": None,
            "gap": None,
            "lexicographic": "no_plan",
            "solver_bound": None,
            "reproducible": True,
            "network_digest": network_digest(SCARCE),
        },
    }
    certificate: Document = {
        **head,
        **dict.fromkeys(("cost_scale", "total_cost", "lower_bound", "gap")),
        "lexicographic": "no_plan",
        "versions": {},
        "cuts": [
            {
                "item": "SALT",
                "nodes": EVERYWHERE,
                "root": False,
                "forced_out": "15",
                "can_enter": "13",
            }
        ],
    }
    copied: tuple[Document, Document] = json.loads(json.dumps((plan, certificate)))
    return copied[0], copied[1]


def test_cut_counted_by_hand_is_accepted(tmp_path: Path) -> None:
    """15 must leave the places for the root, 13 can come in: there is no plan."""
    plan, certificate = documents()

    assert check(SCARCE, FORBID, plan, certificate) == ()
    data = packed(SCARCE, FORBID, orjson.dumps(plan), orjson.dumps(certificate))
    assert both_verdicts(data, tmp_path) == ("intact", set())


CUTS: dict[str, tuple[str, Document]] = {
    "counted wrongly": ("cut_wrong", {"forced_out": "16"}),
    "enters more": ("cut_wrong", {"can_enter": "12"}),
    "root inside": ("cut_wrong", {"root": True}),
    "no places": ("cut_wrong", {"nodes": []}),
    # Lanes without limit lead to the yards: what is wanted there does not have to come in.
    "only the yards": ("cut_wrong", {"nodes": EVERYWHERE[4:]}),
    "a place twice": ("listed_twice", {"nodes": [*EVERYWHERE, EVERYWHERE[0]]}),
    "no such place": (
        "name_unknown",
        {"nodes": [*EVERYWHERE, {"site": "YA", "side": "sent", "qualifier": None}]},
    ),
    "no such item": ("name_unknown", {"item": "SAND"}),
}


@pytest.mark.parametrize("name", CUTS)
def test_cut_that_proves_nothing_is_named(name: str, tmp_path: Path) -> None:
    """Each is counted again by both verifiers."""
    code, change = CUTS[name]
    plan, certificate = documents()
    certificate["cuts"][0] |= change

    found = {violation.code for violation in check(SCARCE, FORBID, plan, certificate)}
    data = packed(SCARCE, FORBID, orjson.dumps(plan), orjson.dumps(certificate))

    assert code in found
    assert both_verdicts(data, tmp_path) == ("broken", found)


def test_no_cut_at_all_proves_nothing() -> None:
    """One wrong cut beside a right one spoils the proof too: it is not what was claimed."""
    plan, certificate = documents()
    right = certificate["cuts"][0]

    certificate["cuts"] = []
    assert [one.code for one in check(SCARCE, FORBID, plan, certificate)] == ["cut_wrong"]
    certificate["cuts"] = [right, right | {"nodes": []}]
    assert {one.code for one in check(SCARCE, FORBID, plan, certificate)} == {"cut_wrong"}


def test_there_is_a_plan_where_shortages_are_allowed() -> None:
    """The same cut under other options: what is short comes from the root without limit."""
    plan, certificate = documents()
    allowed = Options()
    options_digest = digest(canonical_json(allowed.to_document()))
    plan["options_digest"] = certificate["options_digest"] = options_digest

    assert {one.code for one in check(SCARCE, allowed, plan, certificate)} == {"cut_wrong"}


def test_forced_lane_is_a_contradiction_although_shortages_are_allowed() -> None:
    """4 must go over a lane whose origin has 3: the origin's two places must send 4 and get 3."""
    body = network_document(
        items=[{"id": "SALT", "unit": "sack"}],
        sites=[{"id": "D", "roles": ["warehouse"]}, {"id": "Y", "roles": ["ship_to"]}],
        supply=[{"site": "D", "item": "SALT", "quantity": "3"}],
        demand=[{"reference": "A", "site": "Y", "item": "SALT", "quantity": "9"}],
        lanes=[{"origin": "D", "destination": "Y", "unit_cost": "1", "must_ship": "4"}],
    )
    network = network_from(body)
    options = Options()
    plan, certificate = documents()
    digests = (network_digest(network), digest(canonical_json(options.to_document())))
    for document in (plan, certificate):
        document["network_digest"], document["options_digest"] = digests
    plan["certificate"]["network_digest"] = digests[0]
    nodes: list[dict[str, Any]] = [
        {"site": "D", "side": side, "qualifier": None} for side in ("in", "out")
    ]
    certificate["cuts"] = [
        {"item": "SALT", "nodes": nodes, "root": False, "forced_out": "4", "can_enter": "3"}
    ]

    assert check(network, options, plan, certificate) == ()
