"""What plan lines say of other currencies and of charges, and the table of currencies."""

from collections import defaultdict
from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

from service.network.columns import Network
from service.network.units import per_unit
from service.proof.flows import PlanLine
from service.proof.money import charges_due, in_plan_money, is_plain
from service.proof.results import ItemResult
from service.proof.shapes import amount
from service.proof.tariff_lanes import Freights, freights_of
from service.proof.violations import Findings

_PARTS = ("supply", "transport", "charges")


def check_stated(
    network: Network,
    results: Sequence[ItemResult],
    lines: Sequence[PlanLine],
    plan: Mapping[str, Any],
    findings: Findings,
) -> None:
    """Note where the money of other currencies, or a charge, is not what the flow comes to."""
    spent: defaultdict[tuple[str, str], Fraction] = defaultdict(Fraction)
    plain, freights = is_plain(network), freights_of(network)
    for line in lines:
        stated, parts = (None, []) if plain else _of_lane(network, line, freights, spent)
        document = line.document
        if (
            _exact(document.get("stated"), "transport_cost") != stated
            or [_exact(part, "cost", "stated_cost") for part in document.get("charge_parts", ())]
            != parts
            or document.get("charge_parts") == []
        ):
            detail = "not what its lane charges, or in another currency"
            findings.add("plan_line_wrong", detail, place=line.place)
    for result in results:
        for (site, tier), steps in result.drawn.items():
            currency, money = result.stock[site].tier_stated[tier - 1]
            if currency is not None:
                spent[(currency, "supply")] += steps * result.step * money
    _check_table(network, spent, plan, findings)


def _of_lane(
    network: Network,
    line: PlanLine,
    freights: Freights | None,
    spent: defaultdict[tuple[str, str], Fraction],
) -> tuple[dict[str, object] | None, list[dict[str, object] | None]]:
    """Return what a line must state, adding to what is ``spent`` in other currencies."""
    if line.row < 0:
        return None, []
    lanes, item = network.lanes, network.items[line.item]
    quantity = amount(line.document["quantity"])
    stated: dict[str, object] | None = None
    if freights is not None and (tariff := freights.tariff(line.row)) is not None:
        currency = tariff.get("currency")
        if currency is not None:
            steps = quantity / item.step
            paid = freights.bill(line.row, [(line.item, int(steps))]).amount
            stated = {"currency": currency, "transport_cost": paid}
            spent[(currency, "transport")] += paid
    currency, measure = lanes.currency.text(line.row), lanes.measure.text(line.row)
    of_unit = None if measure is None else per_unit(item, measure)
    rate = lanes.unit_cost.fraction(line.row)
    if currency is not None and rate is not None and of_unit is not None:
        money = quantity * of_unit * rate
        stated = {"currency": currency, "transport_cost": money}
        spent[(currency, "transport")] += money
    parts: list[dict[str, object] | None] = []
    for due in charges_due(lanes.charges.text(line.row), item):
        money = due.per_unit * quantity
        if not money:
            continue
        part: dict[str, object] = {"name": due.name, "cost": money}
        if due.currency is not None:
            part = {
                "name": due.name,
                "cost": money * in_plan_money(network.head, due.currency),
                "currency": due.currency,
                "stated_cost": money,
            }
            spent[(due.currency, "charges")] += money
        parts.append(part)
    return stated, parts


def _check_table(
    network: Network,
    spent: Mapping[tuple[str, str], Fraction],
    plan: Mapping[str, Any],
    findings: Findings,
) -> None:
    """Note when the table of currencies is not what is spent in each of them."""
    rates: Any = network.head.get("exchange_rates")
    expected: list[dict[str, object]] | None = None if rates is None else []
    for rate in rates or ():
        code = rate["currency"]
        amounts = {part: spent.get((code, part), Fraction(0)) for part in _PARTS}
        if expected is None or not any(amounts.values()):
            continue
        total = sum(amounts.values(), Fraction(0))
        expected.append(
            {
                "currency": code,
                "rate": Fraction(rate["rate"]),
                "per": Fraction(rate.get("per", "1")),
                "as_of": rate.get("as_of"),
                "source": rate.get("source"),
                **amounts,
                "amount": total,
                "converted": total * in_plan_money(network.head, code),
            }
        )
    stated = plan.get("currencies")
    numbers = ("rate", "per", *_PARTS, "amount", "converted")
    if stated is not None:
        stated = [_exact(row, *numbers) for row in stated]
    if stated != expected:
        findings.add("total_wrong", "not what is paid in other currencies", place="/currencies")


def _exact(document: Mapping[str, Any] | None, *fields: str) -> dict[str, object] | None:
    """Return a part of a document with the texts of some fields as numbers."""
    if document is None:
        return None
    return {name: amount(value) if name in fields else value for name, value in document.items()}
