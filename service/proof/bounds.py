"""What a certificate claims: each step of what is minimised, achieved and bounded."""

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

from service.network.columns import Network
from service.proof.coupled_bounds import Circle
from service.proof.results import ItemResult
from service.proof.shapes import amount
from service.proof.violations import Findings


def check_bounds(  # noqa: PLR0913 - the claims stand in two documents
    network: Network,
    results: Sequence[ItemResult],
    circles: Sequence[Circle],
    plan: Mapping[str, Any],
    certificate: Mapping[str, Any],
    *,
    shortages: bool,
    findings: Findings,
) -> None:
    """Note every step and bound that does not follow from the flow.

    For one network a feasible flow without contradictions is optimal in every step, so that each
    bound is what was achieved. Items that share limits (``circles``) have a gap, which is the sum
    of theirs.
    """
    coupled = {item for circle in circles for item in circle.items}
    expected: list[tuple[str, int | str, Fraction]] = []
    for result in results:
        item = network.items[result.item].id
        if item in coupled:
            continue
        if shortages:
            for priority, steps in result.short_by_priority.items():
                expected.append((item, priority, steps * result.step))
        if result.late is not None:
            expected.append((item, "lateness", result.late * result.step))
        expected.append((item, "cost", sum(result.money.values(), Fraction(0))))
    together = sum(len(circle.priorities) + 1 for circle in circles)
    steps = certificate["steps"][: len(expected)]
    others = certificate["steps"][len(expected) :]
    if len(others) != together or any("items" in step for step in steps):
        findings.add("bound_wrong", "not the steps of the plan", place="/steps")
        return
    stated = [
        (step["item"], step.get("priority", step["of"]), amount(step["achieved"])) for step in steps
    ]
    if stated != expected:
        findings.add("bound_wrong", "the steps are not what was achieved", place="/steps")
    if any(amount(step["bound"]) != amount(step["achieved"]) for step in steps):
        findings.add("bound_wrong", "a bound is not what was achieved", place="/steps")
    total = sum((money for _, of, money in expected if of == "cost"), Fraction(0))
    gap, proved = Fraction(0), True
    scale = amount(certificate["cost_scale"])
    for circle, stated_proofs in zip(circles, certificate.get("coupled", ()), strict=True):
        count = len(circle.priorities) + 1
        cost, open_, exact = _check_circle(
            circle, others[:count], stated_proofs["proofs"], scale, findings
        )
        total, gap, proved = total + cost, gap + open_, proved and exact
        others = others[count:]
    _check_ends(plan, certificate, total=total, gap=gap, proved=proved, findings=findings)


def _check_ends(  # noqa: PLR0913 - the claims stand in two documents
    plan: Mapping[str, Any],
    certificate: Mapping[str, Any],
    *,
    total: Fraction,
    gap: Fraction,
    proved: bool,
    findings: Findings,
) -> None:
    """Note what both documents state at last, if it does not follow from the steps."""
    how_good = "proved" if proved else "best_found"
    for place, value, right in (
        ("/total_cost", certificate["total_cost"], total),
        ("/lower_bound", certificate["lower_bound"], total - gap),
        ("/gap", certificate["gap"], gap),
        ("plan/certificate/lower_bound", plan["certificate"]["lower_bound"], total - gap),
        ("plan/certificate/gap", plan["certificate"]["gap"], gap),
    ):
        if amount(value) != right:
            findings.add("bound_wrong", "it does not follow from the steps", place=place)
    if {certificate["lexicographic"], plan["certificate"]["lexicographic"]} != {how_good}:
        findings.add("bound_wrong", f"the plan is {how_good}", place="/lexicographic")


def _check_circle(
    circle: Circle,
    steps: Sequence[Mapping[str, Any]],
    proofs: Sequence[Mapping[str, Any] | None],
    scale: Fraction,
    findings: Findings,
) -> tuple[Fraction, Fraction, bool]:
    """Note what is wrong with the steps of a circle; return cost, gap, and if all are proved."""
    claims = circle.claims(scale)
    cost, gap, exact = claims[-1].achieved, Fraction(0), True
    if len(proofs) != len(claims):
        findings.add("bound_wrong", "not a proof for each step", place="/coupled")
        return cost, gap, exact
    for at, (claim, step, proof) in enumerate(zip(claims, steps, proofs, strict=True)):
        place = f"/coupled/{circle.items[0]}/{at}"
        measure = circle.measure if claim.priority is not None else None
        says = step.get("items"), step.get("priority"), step.get("measure")
        if says != (circle.items, claim.priority, measure):
            findings.add("bound_wrong", "not the step that belongs here", place=place)
            continue
        achieved, stated = amount(step["achieved"]), amount(step["bound"])
        if achieved != claim.achieved:
            findings.add("bound_wrong", "the steps are not what was achieved", place=place)
        bound = circle.bound(claim, proof, findings, place=place)
        if bound is not None and stated > bound:
            findings.add("bound_wrong", f"the proof gives no more than {bound}", place=place)
        exact = exact and stated == achieved
        if claim.priority is None:
            gap = achieved - stated
    return cost, gap, exact
