"""The options of a run as query parameters of the interface description."""

from typing import Any, Final

from service.network.options import (
    AGE_MINUTES_MAX,
    DEADLINE_SECONDS_DEFAULT,
    DEADLINE_SECONDS_MAX,
    LABEL_CHARACTERS_MAX,
)


def _parameter(
    name: str, description: str, schema: dict[str, object], example: object
) -> dict[str, Any]:
    """Return one optional query parameter."""
    return {
        "name": name,
        "in": "query",
        "required": False,
        "description": description,
        "schema": schema,
        "example": example,
    }


OPTION_PARAMETERS: Final = [
    _parameter(
        "shortages",
        "Whether demand may stay unserved where goods or room are scarce. With forbid, a network "
        "in which not everything can be served has no plan.",
        {"type": "string", "enum": ["allow", "forbid"], "default": "allow"},
        "allow",
    ),
    _parameter(
        "worth_at_most",
        "Money per item unit, in the currency of the network: order lines that name neither "
        "priority nor shortage cost are served only up to this cost a unit.",
        {"type": "string", "pattern": r"^(0|[1-9][0-9]*)(\.[0-9]{1,6})?$"},
        "1.25",
    ),
    _parameter(
        "demand_rounding",
        "What happens to an order line whose quantity is no multiple of the item's step: refuse "
        "the network, or round up or down; the difference is reported by line.",
        {"type": "string", "enum": ["refuse", "up", "down"], "default": "refuse"},
        "up",
    ),
    _parameter(
        "bad_rows",
        "What happens to order lines that cannot be read: refuse the network, or set those lines "
        "aside, list them on the plan, and plan the rest.",
        {"type": "string", "enum": ["refuse", "set_aside"], "default": "refuse"},
        "refuse",
    ),
    _parameter(
        "label",
        "A free text to find the run by.",
        {"type": "string", "minLength": 1, "maxLength": LABEL_CHARACTERS_MAX},
        "evening, second attempt",
    ),
    _parameter(
        "plan_for",
        "The date under which the run is numbered; the local date of the cut-off if absent.",
        {"type": "string", "format": "date"},
        "2026-02-03",
    ),
    _parameter(
        "deadline_seconds",
        "Seconds from acceptance until the run must be finished; then it fails.",
        {
            "type": "integer",
            "minimum": 1,
            "maximum": DEADLINE_SECONDS_MAX,
            "default": DEADLINE_SECONDS_DEFAULT,
        },
        120,
    ),
    _parameter(
        "maximum_age_minutes",
        "Minutes by which the stock of a supply row may be older than the cut-off.",
        {"type": "integer", "minimum": 0, "maximum": AGE_MINUTES_MAX},
        60,
    ),
]

HEADER_PARAMETERS: Final = [
    {
        "name": "Prefer",
        "in": "header",
        "required": False,
        "description": "RFC 7240. respond-async is what happens in any case; wait is not followed "
        "yet. Preference-Applied says what was done.",
        "schema": {"type": "string"},
        "example": "respond-async",
    },
]
