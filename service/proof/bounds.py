"""What a certificate claims: each step of what is minimised, achieved and bounded."""

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

from service.network.columns import Network
from service.proof.results import ItemResult
from service.proof.shapes import amount
from service.proof.violations import Findings


def check_bounds(  # noqa: PLR0913 - the claims stand in two documents
    network: Network,
    results: Sequence[ItemResult],
    plan: Mapping[str, Any],
    certificate: Mapping[str, Any],
    *,
    shortages: bool,
    findings: Findings,
) -> None:
    """Note every step and bound that does not follow from the flow.

    For one network a feasible flow without contradictions is optimal in every step, so that each
    bound is what was achieved and the gap is 0.
    """
    expected: list[tuple[str, int | str, Fraction]] = []
    for result in results:
        item = network.items[result.item].id
        if shortages:
            for priority, steps in result.short_by_priority.items():
                expected.append((item, priority, steps * result.step))
        if result.late is not None:
            expected.append((item, "lateness", result.late * result.step))
        expected.append((item, "cost", sum(result.money.values(), Fraction(0))))
    steps = certificate["steps"]
    stated = [
        (step["item"], step.get("priority", step["of"]), amount(step["achieved"])) for step in steps
    ]
    if stated != expected:
        findings.add("bound_wrong", "the steps are not what was achieved", place="/steps")
    if any(amount(step["bound"]) != amount(step["achieved"]) for step in steps):
        findings.add("bound_wrong", "a bound is not what was achieved", place="/steps")
    total = sum((money for _, of, money in expected if of == "cost"), Fraction(0))
    for place, value in (
        ("/total_cost", certificate["total_cost"]),
        ("/lower_bound", certificate["lower_bound"]),
        ("plan/certificate/lower_bound", plan["certificate"]["lower_bound"]),
    ):
        if amount(value) != total:
            findings.add("bound_wrong", "it is not the cost of the plan", place=place)
