"""The plan as a document: every table, added up exactly from the flow of each item."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from service.network.columns import Network
from service.network.currencies import minor_units
from service.planning.documents.amounts import Document, Measured, text
from service.planning.documents.consignments import consignments
from service.planning.documents.money_shown import MoneyShown, currencies_of, shows_money
from service.planning.documents.order_line_documents import order_line_documents
from service.planning.documents.order_lines import shares_of
from service.planning.documents.plan_lines import ItemPlan, item_plan, plan_line_documents
from service.planning.documents.rules_in_force import rules_in_force
from service.planning.documents.shortages import shortage_rows
from service.planning.model.arcs import Kind
from service.planning.model.compile import Compiled
from service.planning.solution import Solution
from service.planning.solve import ItemFlow

FORMAT = 1


@dataclass(frozen=True, slots=True, kw_only=True)
class Setting:
    """What a plan repeats of its input: digests, warnings, rows set aside."""

    network_digest: str
    options_digest: str
    warnings: Sequence[Mapping[str, Any]]
    set_aside: Sequence[Mapping[str, Any]]


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanDocument:
    """The document of a plan, and its total cost."""

    document: Document
    total_cost: Fraction


@dataclass(slots=True)
class _Tables:
    """Collects the rows of all items."""

    plans: list[ItemPlan]
    order_lines: dict[int, Document]
    shortages: dict[int, Document]
    kept_short: list[tuple[tuple[int, int], Document]]
    site_use: list[tuple[tuple[int, int], Document]]
    quantities: list[Document]
    references: dict[tuple[int, int], set[bytes]]
    shortage_money: Fraction
    late_money: Fraction
    circling: list[str]


def planned(compiled: Compiled, solution: Solution, setting: Setting) -> PlanDocument:
    """Return the document of a plan from the flow of all items."""
    network = compiled.network
    tables = _Tables([], {}, {}, [], [], [], {}, Fraction(0), Fraction(0), [])
    for flow in solution.flows:
        _add_item(network, flow, tables, scale=compiled.cost_scale)
    scale = compiled.cost_scale
    lines = [line for plan in tables.plans for line in plan.lines]
    parts = {
        "supply": sum(line.supply for line in lines) / scale,
        "handling": sum(line.handling for line in lines) / scale,
        "transport": sum(line.transport for line in lines) / scale,
        "charges": sum(line.charges for line in lines) / scale,
        "shortage": tables.shortage_money,
        "lateness": tables.late_money,
    }
    cost = sum(parts.values(), Fraction(0))
    rounded = rounded_money(cost, str(network.head["currency"]))
    order_lines = [tables.order_lines[row] for row in sorted(tables.order_lines)]
    shown = MoneyShown(network)
    complete = shown.add if shows_money(network) else None
    document = {
        **_head(compiled, "planned", setting),
        "total_cost": text(cost),
        "total_cost_rounded": rounded,
        "rounding_difference": text(Fraction(rounded) - cost),
        "cost_parts": {name: text(part) for name, part in parts.items()},
        "totals": _totals(order_lines, tables.quantities, setting),
        "plan_lines": plan_line_documents(network, tables.plans, scale, complete=complete),
        **currencies_of(network, shown),
        "order_lines": order_lines,
        "consignments": consignments(network, tables.plans, scale, references=tables.references),
        "shortages": [
            *(tables.shortages[row] for row in sorted(tables.shortages)),
            *(row for _, row in sorted(tables.kept_short, key=lambda pair: pair[0])),
        ],
        "site_use": [row for _, row in sorted(tables.site_use, key=lambda pair: pair[0])],
        "rules_in_force": rules_in_force(compiled, solution),
        "set_aside": list(setting.set_aside),
        "warnings": [*setting.warnings, *_doubts(tables.circling)],
        "certificate": {
            "format": FORMAT,
            "feasible": True,
            "lower_bound": text(cost - solution.gap(scale)),
            "gap": text(solution.gap(scale)),
            "lexicographic": "proved" if solution.proved else "best_found",
            "solver_bound": None,
            "reproducible": True,
            "network_digest": setting.network_digest,
        },
    }
    return PlanDocument(document=document, total_cost=cost)


def unplanned(compiled: Compiled, reason: Document, setting: Setting) -> Document:
    """Return the document of a network without a plan."""
    return {
        **_head(compiled, "no_plan", setting),
        "total_cost": None,
        "total_cost_rounded": None,
        "rounding_difference": None,
        "cost_parts": None,
        "totals": _totals([], [], setting),
        "plan_lines": [],
        "order_lines": [],
        "consignments": [],
        "shortages": [],
        "site_use": [],
        "rules_in_force": rules_in_force(compiled, Solution(flows=(), coupled=())),
        "set_aside": list(setting.set_aside),
        "warnings": list(setting.warnings),
        "reason": reason,
        "certificate": {
            "format": FORMAT,
            "feasible": False,
            "lower_bound": None,
            "gap": None,
            "lexicographic": "no_plan",
            "solver_bound": None,
            "reproducible": True,
            "network_digest": setting.network_digest,
        },
    }


def rounded_money(amount: Fraction, currency: str) -> str:
    """Return ``amount`` with the decimals of ``currency`` (ISO 4217), half away from zero."""
    decimals = minor_units(currency)
    if decimals is None:
        raise ValueError(f"{currency} has no minor unit; the intake refuses it")
    scaled = abs(amount) * 10**decimals
    units = (2 * scaled.numerator + scaled.denominator) // (2 * scaled.denominator)
    sign = "-" if amount < 0 and units else ""
    digits = str(units).rjust(decimals + 1, "0")
    return sign + (f"{digits[:-decimals]}.{digits[-decimals:]}" if decimals else digits)


def _head(compiled: Compiled, status: str, setting: Setting) -> Document:
    """Return the fields that every plan begins with."""
    head = compiled.network.head
    return {
        "format": FORMAT,
        "status": status,
        "method": compiled.method,
        "method_reasons": list(compiled.method_reasons),
        "name": head.get("name"),
        "currency": head["currency"],
        "cut_off": head["cut_off"],
        "release_by": head.get("release_by"),
        "network_digest": setting.network_digest,
        "options_digest": setting.options_digest,
    }


def _totals(order_lines: list[Document], quantities: list[Document], setting: Setting) -> Document:
    """Return how many lines go complete, in part, not at all, and the quantities by item."""
    none = sum(line["served"] == "0" and line["short"] != "0" for line in order_lines)
    complete = sum(line["short"] == "0" for line in order_lines)
    return {
        "lines_complete": complete,
        "lines_in_part": len(order_lines) - complete - none,
        "lines_none": none,
        **_late_lines(order_lines),
        "set_aside": len(setting.set_aside),
        "quantities": quantities,
    }


def _late_lines(order_lines: list[Document]) -> Document:
    """Return how many lines come late, in a plan that shows dates."""
    if not any("days_late" in line for line in order_lines):
        return {}
    return {"lines_late": sum(line["days_late"] > 0 for line in order_lines)}


def _add_item(network: Network, flow: ItemFlow, tables: _Tables, *, scale: Fraction) -> None:
    """Add the rows of one item to all tables."""
    plan = item_plan(network, flow, scale)
    groups, item = flow.own.groups, network.items[flow.own.item]
    shares = shares_of(network, groups, plan.paths.paths, names=plan.name_bytes())
    served = dict.fromkeys(groups.rows.tolist(), 0)
    references, departs = network.demand.reference.tolist(), flow.own.lanes.departs
    for row, own_shares in shares.items():
        served[row] = sum(share.steps for share in own_shares)
        for share in own_shares:
            for leg in share.path.legs:
                on_day = plan.rows[leg], 0 if departs is None else int(departs[leg])
                tables.references.setdefault(on_day, set()).add(references[row])
    tables.plans.append(plan)
    tables.order_lines.update(order_line_documents(network, plan, shares, served))
    lines, kept = shortage_rows(network, flow, served=served)
    tables.shortages.update(lines)
    tables.kept_short.extend(kept)
    tables.shortage_money += sum(
        (steps * groups.money.fraction(group) for group, steps in flow.amounts(Kind.SHORT).items()),
        Fraction(0),
    )
    tables.late_money += _late_money(flow)
    tables.site_use.extend(_site_use(network, flow))
    tables.circling.extend(plan.names[lane] for lane in plan.paths.circling)
    wanted = sum(groups.row_steps.tolist())
    if wanted:
        goes = sum(served.values()) * item.step
        tables.quantities.append(
            {
                "item": item.id,
                "unit": item.unit,
                "wanted": text(wanted * item.step),
                "served": text(goes),
                "short": text(wanted * item.step - goes),
                "weight_kg": Measured().plus(goes, item.weight_kg).text,
            }
        )


def _late_money(flow: ItemFlow) -> Fraction:
    """Return what lateness of one item costs in money."""
    own = flow.own
    if not own.days_late.any():
        return Fraction(0)
    late = np.flatnonzero(own.days_late)
    late = late[flow.flow[late] > 0]
    return sum(
        (
            steps * days * own.groups.late_money.fraction(group)
            for steps, days, group in zip(
                flow.flow[late].tolist(),
                own.days_late[late].tolist(),
                own.subject[late].tolist(),
                strict=True,
            )
        ),
        Fraction(0),
    )


def _site_use(network: Network, flow: ItemFlow) -> list[tuple[tuple[int, int], Document]]:
    """Return what becomes of the stock of one item, by site, where there is any."""
    stock = flow.own.stock
    item = network.items[flow.own.item]
    supplied, kept = flow.amounts(Kind.SUPPLY), flow.amounts(Kind.KEPT)
    sums: dict[int, list[int]] = {}
    for tier, site in enumerate(stock.site.tolist()):
        own = sums.setdefault(site, [0, 0, 0])
        own[0] += int(stock.steps[tier])
        own[1] += supplied.get(tier, 0) - kept.get(tier, 0)
        own[2] += kept.get(tier, 0)
    return [
        (
            (site, flow.own.item),
            {
                "site": network.sites[site].id,
                "item": item.id,
                "available": text(available * item.step),
                "shipped": text(shipped * item.step),
                "kept": text(held * item.step),
                "left": text((available - shipped - held) * item.step),
            },
        )
        for site, (available, shipped, held) in sums.items()
        if available
    ]


def _doubts(circling: Sequence[str]) -> list[Document]:
    """Return the warnings that only planning can give."""
    if not circling:
        return []
    return [
        {
            "code": "flow_circles",
            "count": len(circling),
            "detail": "Goods go round on these lanes because minimums force them to; no order "
            "line gets them. Check must_ship and fixed quantities.",
            "examples": [{"pointer": "/lanes", "value": name} for name in sorted(circling)[:3]],
        }
    ]
