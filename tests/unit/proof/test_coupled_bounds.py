"""What a certificate of shared limits must not claim; both verifiers find it."""

import copy
import json
from collections.abc import Callable
from functools import cache
from pathlib import Path
from typing import Any

import orjson
import pytest

from service.proof.check import check
from tests.evidence.test_verifiers_agree import both_verdicts
from tests.evidence.zips import packed
from tests.factories import Planned, plan_network
from tests.unit.planning.model.test_shared_limits import network

Edit = Callable[[dict[str, Any], dict[str, Any]], None]


@cache
def planned() -> Planned:
    """Return the plan of two items that share a lane's weight."""
    return plan_network(network(capacity="300"))


def _certificate(*path: str | int, to: object) -> Edit:
    def edit(plan: dict[str, Any], certificate: dict[str, Any]) -> None:
        del plan
        place: Any = certificate
        for step in path[:-1]:
            place = place[step]
        place[path[-1]] = to

    return edit


def _higher_bound(plan: dict[str, Any], certificate: dict[str, Any]) -> None:
    """Claim that nothing is cheaper, everywhere where it is said."""
    cost = certificate["total_cost"]
    certificate["steps"][-1]["bound"] = cost
    for document in (certificate, plan["certificate"]):
        document |= {"lower_bound": cost, "gap": "0", "lexicographic": "proved"}


def _more_near(plan: dict[str, Any], certificate: dict[str, Any]) -> None:
    """Move one more HEAVY near, which the lane has no weight for."""
    del certificate
    for line in plan["plan_lines"]:
        if line["item"] == "HEAVY":
            line["quantity"] = "2" if line["lane"] == "N" else "8"


PROOF = ("coupled", 0, "proofs", 1)
PRICE = (*PROOF, "multipliers", 0)


def _cap(priority: int, value: str) -> Edit:
    return _certificate(*PROOF, "caps", to=[{"priority": priority, "value": value}])


CASES: list[tuple[str, str, Edit]] = [
    ("a bound above what the prices prove", "bound_wrong", _higher_bound),
    ("more than a shared limit", "limit_broken", _more_near),
    (
        "a price of the wrong sign",
        "multiplier_wrong",
        _certificate(*PRICE, "value", to="-1"),
    ),
    ("a price of no limit", "name_unknown", _certificate(*PRICE, "lane", to="F")),
    ("no price at all", "bound_wrong", _certificate(*PROOF, "multipliers", to=[])),
    (
        "a price that is not whole",
        "multiplier_wrong",
        _certificate(*PRICE, "value", to="1/7"),
    ),
    ("a scale of 0", "cost_scale_wrong", _certificate(*PROOF, "scale", to="0")),
    ("no proof of the cost", "bound_wrong", _certificate(*PROOF, to=None)),
    ("an item left out", "bound_wrong", _certificate("coupled", 0, "items", to=["HEAVY"])),
    ("an unknown item", "name_unknown", _certificate("coupled", 0, "items", to=["HEAVY", "NONE"])),
    ("another measure", "bound_wrong", _certificate("steps", 0, "measure", to="weight_kg")),
    ("a smaller gap", "bound_wrong", _certificate("gap", to="0.1")),
    ("proved", "bound_wrong", _certificate("lexicographic", to="proved")),
    (
        "a negative cap",
        "multiplier_wrong",
        _cap(5, "-1"),
    ),
    (
        "a cap of nothing",
        "multiplier_wrong",
        _cap(4, "1"),
    ),
]


@pytest.mark.parametrize(("name", "code", "edit"), CASES, ids=[name for name, _, _ in CASES])
def test_what_does_not_follow_is_found_by_both_verifiers(
    name: str, code: str, edit: Edit, tmp_path: Path
) -> None:
    """A bound is worth nothing if one can simply write a better one."""
    made = planned()
    plan = copy.deepcopy(dict(made.plan))
    certificate = copy.deepcopy(dict(made.certificate))
    edit(plan, certificate)

    found = {one.code for one in check(made.network, made.options, plan, certificate)}
    data = packed(made.network, made.options, orjson.dumps(plan), orjson.dumps(certificate))
    verdict, codes = both_verdicts(data, tmp_path)

    assert code in found, (name, found)
    assert verdict == "broken"
    assert code in codes


def test_the_plan_as_it_was_made_is_proved(tmp_path: Path) -> None:
    """Else the cases above would mean little."""
    made = planned()
    data = packed(
        made.network, made.options, made.plan_bytes, json.dumps(made.certificate).encode()
    )

    assert both_verdicts(data, tmp_path) == ("intact", set())
