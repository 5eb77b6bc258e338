"""Format 1 of plan and certificate: their shapes. Frozen once released."""

from typing import Final

from service.proof.coupled_shapes import (
    CIRCLE,
    CONTRADICTION,
    ONE_MORE,
    SIDES,
)
from service.proof.money_shapes import CHARGE_PART, CURRENCY, FREIGHT, STATED
from service.proof.shapes import (
    Shape,
    is_amount,
    is_any_object,
    is_count,
    is_digest,
    is_flag,
    is_text,
    is_texts,
    is_whole,
    list_of,
    one_of,
    or_null,
    record,
)
from service.proof.step_shapes import step

FORMAT: Final = 1

_TEXT_OR_NULL = or_null(is_text)
_EMPTY = one_of([])
_METHOD = one_of("min_cost_flow", "linear_program")
_HOW_GOOD = ("proved", "best_found")
_AMOUNT_OR_UNKNOWN: Shape = lambda value: None if value == "unknown" else is_amount(value)  # noqa: E731 - one line says it

_DATES: Final = {"departs": is_text, "arrives": is_text}
_COST_PARTS = ("supply", "handling", "transport", "charges", "shortage", "lateness")
_PLAN_LINE = record(
    {
        "lane": _TEXT_OR_NULL,
        "origin": is_text,
        "destination": is_text,
        "item": is_text,
        "quantity": is_amount,
        "unit_cost": is_amount,
        "transport_cost": is_amount,
        "supply_cost": is_amount,
        "handling_cost": is_amount,
        "charges": is_amount,
        "cost": is_amount,
    },
    {
        "departs": _TEXT_OR_NULL,
        "arrives": _TEXT_OR_NULL,
        "stated": STATED,
        "charge_parts": list_of(CHARGE_PART),
    },
)
_SOURCE = record(
    {
        "origin": is_text,
        "item": is_text,
        "lot": _TEXT_OR_NULL,
        "quantity": is_amount,
        "legs": list_of(record({"lane": is_text}, _DATES)),
    },
    {"arrives": is_text},
)
_ORDER_LINE = record(
    {
        "reference": is_text,
        "order": _TEXT_OR_NULL,
        "site": is_text,
        "item": is_text,
        "quantity": is_amount,
        "served": is_amount,
        "short": is_amount,
        "priority": or_null(is_count),
        "sources": list_of(_SOURCE),
    },
    {
        "shortage_cost": is_amount,
        "ordered": is_amount,
        "earliest": is_text,
        "due": is_text,
        "latest": is_text,
        "days_late": is_count,
        "tags": list_of(is_text),
        "extra": is_texts,
    },
)
_CONSIGNMENT = record(
    {
        "lane": is_text,
        "carrier": _TEXT_OR_NULL,
        "origin": is_text,
        "destination": is_text,
        "pallets": _AMOUNT_OR_UNKNOWN,
        "weight_kg": _AMOUNT_OR_UNKNOWN,
        "volume_m3": _AMOUNT_OR_UNKNOWN,
        "cost": is_amount,
        "order_references": list_of(is_text),
    },
    {**_DATES, "freight": FREIGHT},
)
_SHORTAGE = record(
    {
        "reference": _TEXT_OR_NULL,
        "site": is_text,
        "item": is_text,
        "priority": or_null(is_count),
        "quantity": is_amount,
        "reason": is_text,
        "next_chance": _TEXT_OR_NULL,
    },
    {"outranked_by": is_any_object, "kept": one_of(True)},  # noqa: FBT003 - the value that JSON may have,
)
_SITE_USE = record(
    {
        "site": is_text,
        "item": is_text,
        "available": is_amount,
        "shipped": is_amount,
        "kept": is_amount,
        "left": is_amount,
    }
)
_RULE = record(
    {
        "rule": is_text,
        "id": is_text,
        "note": _TEXT_OR_NULL,
        "owner": _TEXT_OR_NULL,
        "applied": is_flag,
        "binding": is_flag,
    },
    {"one_more": list_of(ONE_MORE)},
)
_QUANTITIES = record(
    {
        "item": is_text,
        "unit": is_text,
        "wanted": is_amount,
        "served": is_amount,
        "short": is_amount,
        "weight_kg": _AMOUNT_OR_UNKNOWN,
    }
)
_PLAN_HEAD: dict[str, Shape] = {
    "format": one_of(FORMAT),
    "method": _METHOD,
    "method_reasons": list_of(is_text),
    "name": _TEXT_OR_NULL,
    "currency": is_text,
    "cut_off": is_text,
    "release_by": _TEXT_OR_NULL,
    "network_digest": is_digest,
    "options_digest": is_digest,
    "rules_in_force": list_of(_RULE),
    "set_aside": list_of(is_any_object),
    "warnings": list_of(is_any_object),
}
_PLAN_LINES_COUNTS: dict[str, Shape] = {
    "lines_complete": is_count,
    "lines_in_part": is_count,
    "lines_none": is_count,
    "set_aside": is_count,
}


def _summary(*, feasible: bool, bound: Shape, gap: Shape, lexicographic: tuple[str, ...]) -> Shape:
    """Return the shape of the certificate's summary on the plan."""
    return record(
        {
            "format": one_of(FORMAT),
            "feasible": one_of(feasible),
            "lower_bound": bound,
            "gap": gap,
            "lexicographic": one_of(*lexicographic),
            "solver_bound": one_of(None),
            "reproducible": is_flag,
            "network_digest": is_digest,
        }
    )


_PLANNED = record(
    {
        **_PLAN_HEAD,
        "status": one_of("planned"),
        "total_cost": is_amount,
        "total_cost_rounded": is_amount,
        "rounding_difference": is_amount,
        "cost_parts": record(dict.fromkeys(_COST_PARTS, is_amount)),
        "totals": record(
            {**_PLAN_LINES_COUNTS, "quantities": list_of(_QUANTITIES)}, {"lines_late": is_count}
        ),
        "plan_lines": list_of(_PLAN_LINE),
        "order_lines": list_of(_ORDER_LINE),
        "consignments": list_of(_CONSIGNMENT),
        "shortages": list_of(_SHORTAGE),
        "site_use": list_of(_SITE_USE),
        "certificate": _summary(
            feasible=True, bound=is_amount, gap=is_amount, lexicographic=_HOW_GOOD
        ),
    },
    {"currencies": list_of(CURRENCY)},
)
_NO_PLAN = record(
    {
        **_PLAN_HEAD,
        "status": one_of("no_plan"),
        "total_cost": one_of(None),
        "total_cost_rounded": one_of(None),
        "rounding_difference": one_of(None),
        "cost_parts": one_of(None),
        "totals": record({**_PLAN_LINES_COUNTS, "quantities": _EMPTY}),
        **dict.fromkeys(
            ("plan_lines", "order_lines", "consignments", "shortages", "site_use"), _EMPTY
        ),
        "reason": is_any_object,
        "certificate": _summary(
            feasible=False, bound=one_of(None), gap=one_of(None), lexicographic=("no_plan",)
        ),
    }
)

# Where dates matter, a place is a site on a day.
_DAY: Final = {"day": is_text}
_AT_TIER = record({"site": is_text, "tier": is_count, "quantity": is_amount}, _DAY)
_ITEM_PROOF = record(
    {
        "item": is_text,
        "base": is_whole,
        "draws": list_of(_AT_TIER),
        "kept": list_of(_AT_TIER),
        "serves": list_of(
            record(
                {
                    "site": is_text,
                    "group": is_text,
                    "from": one_of("out", "received"),
                    "origin": _TEXT_OR_NULL,
                    "quantity": is_amount,
                },
                _DAY,
            )
        ),
        "passes": list_of(
            record({"site": is_text, "origin": _TEXT_OR_NULL, "quantity": is_amount}, _DAY)
        ),
        "shortages": list_of(
            record({"site": is_text, "group": _TEXT_OR_NULL, "quantity": is_amount})
        ),
        "prices": list_of(
            record(
                {
                    "site": is_text,
                    "side": one_of(*SIDES),
                    "qualifier": _TEXT_OR_NULL,
                    "price": is_whole,
                },
                _DAY,
            )
        ),
    },
    {
        "late_base": is_whole,
        "stored": list_of(record({"site": is_text, "day": is_text, "quantity": is_amount})),
    },
)
_CUT = record(
    {
        "item": is_text,
        "nodes": list_of(
            record({"site": is_text, "side": one_of(*SIDES), "qualifier": _TEXT_OR_NULL}, _DAY)
        ),
        "root": is_flag,
        "forced_out": is_amount,
        "can_enter": is_amount,
    }
)
_CERTIFICATE_HEAD: dict[str, Shape] = {
    "format": one_of(FORMAT),
    "method": _METHOD,
    "network_digest": is_digest,
    "options_digest": is_digest,
    "currency": is_text,
    "versions": is_texts,
}


_PROVED = record(
    {
        **_CERTIFICATE_HEAD,
        "cost_scale": is_amount,
        "total_cost": is_amount,
        "lower_bound": is_amount,
        "gap": is_amount,
        "lexicographic": one_of(*_HOW_GOOD),
        "steps": list_of(step),
        "items": list_of(_ITEM_PROOF),
    },
    {"coupled": list_of(CIRCLE)},
)
_CUT_OFF = record(
    {
        **_CERTIFICATE_HEAD,
        **dict.fromkeys(("cost_scale", "total_cost", "lower_bound", "gap"), one_of(None)),
        "lexicographic": one_of("no_plan"),
        "cuts": list_of(_CUT),
    },
    {"contradictions": list_of(CONTRADICTION)},
)


def plan_shape(plan: object) -> str | None:
    """Return what is wrong with the shape of a plan, None if nothing is."""
    without = isinstance(plan, dict) and plan.get("status") == "no_plan"
    return _NO_PLAN(plan) if without else _PLANNED(plan)


def certificate_shape(certificate: object) -> str | None:
    """Return what is wrong with the shape of a certificate, None if nothing is."""
    without = isinstance(certificate, dict) and certificate.get("lexicographic") == "no_plan"
    return _CUT_OFF(certificate) if without else _PROVED(certificate)
