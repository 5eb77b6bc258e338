"""Every way in which a plan can be wrong is found, by name, by both verifiers."""

from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import numpy as np
import orjson
import pytest

from service.network.columns import Decimals, Network, Texts
from service.proof.check import check
from service.proof.violations import CODES, EXAMPLES_MAX, Findings
from tests.evidence.test_verifiers_agree import both_verdicts
from tests.evidence.zips import entries_of, packed, repacked, with_network
from tests.unit.proof.by_hand import NETWORK, OPTIONS, documents
from tests.unit.proof.cases import CASES, Edit


def test_plan_and_proof_from_paper_are_accepted() -> None:
    """No planning code had a hand in them."""
    assert check(NETWORK, OPTIONS, *documents()) == ()


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
        # tests/unit/proof/test_coupled_bounds.py
        "multiplier_wrong",
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
