"""The fields of the three big tables, each with its JSON Schema, in the order that is shown."""

from collections.abc import Mapping
from typing import Final

from service.network import value_schemas as schemas
from service.network.charge_reading import CHARGE_SCHEMA, CHARGES_MAX
from service.network.days import TRANSIT_DAYS_MAX
from service.network.scanned import FieldKind
from service.network.value_schemas import Schema, decimal_schema

PRIORITY_MAX: Final = 9
PRIORITY_DEFAULT: Final = 5

_PRIORITY: Schema = {"type": "integer", "minimum": 1, "maximum": PRIORITY_MAX}
_DAYS: Schema = {
    "anyOf": [
        {"type": "integer", "minimum": 0, "maximum": TRANSIT_DAYS_MAX},
        {"type": "string", "pattern": "^(0|[1-9][0-9]{0,2})$"},
    ]
}
_QUANTITY = decimal_schema(3, signed=False)
_MONEY = decimal_schema(6, signed=False)
_RATE = decimal_schema(6, signed=True)
_CURRENCY: Schema = {
    "type": "string",
    "pattern": "^[A-Z]{3}$",
    "description": "Of unit_cost, ISO 4217; absent: the plan's. Others need an exchange rate.",
    "examples": ["NOK"],
}

SUPPLY_FIELDS: Final[Mapping[str, Schema]] = {
    "site": schemas.ID_SCHEMA,
    "item": schemas.ID_SCHEMA,
    "quantity": _QUANTITY,
    "unit": schemas.ID_SCHEMA,
    "unit_cost": _RATE,
    "currency": _CURRENCY,
    "on_hand": _QUANTITY,
    "reserved": _QUANTITY,
    "on_hold": _QUANTITY,
    "as_of": schemas.INSTANT_SCHEMA,
    "lot": schemas.ID_SCHEMA,
    "best_before": schemas.DATE_SCHEMA,
    "available_from": schemas.described(
        schemas.DATE_SCHEMA, "The first date on which it can be drawn; now if absent.", "2026-02-05"
    ),
    "keep": {
        "type": "object",
        "properties": {"quantity": _QUANTITY, "priority": _PRIORITY},
        "required": ["quantity"],
        "additionalProperties": False,
    },
    "extra": schemas.EXTRA_SCHEMA,
}
DEMAND_FIELDS: Final[Mapping[str, Schema]] = {
    "reference": schemas.ID_SCHEMA,
    "order": schemas.ID_SCHEMA,
    "ordered_at": schemas.INSTANT_SCHEMA,
    "site": schemas.ID_SCHEMA,
    "item": schemas.ID_SCHEMA,
    "quantity": _QUANTITY,
    "unit": schemas.ID_SCHEMA,
    "priority": _PRIORITY,
    "shortage_cost": _MONEY,
    "worth_at_most": _MONEY,
    "earliest": schemas.described(
        schemas.DATE_SCHEMA, "Nothing may arrive before this date.", "2026-02-04"
    ),
    "due": schemas.described(
        schemas.DATE_SCHEMA, "The date it is wished for; every day after it is late.", "2026-02-05"
    ),
    "latest": schemas.described(
        schemas.DATE_SCHEMA, "Nothing may arrive after this date.", "2026-02-09"
    ),
    "late_cost_per_day": schemas.described(
        _MONEY, "Money for each unit and day after due; else lateness counts before money.", "0.50"
    ),
    "origins": {**schemas.IDS_SCHEMA, "minItems": 1},
    "tags": schemas.IDS_SCHEMA,
    "extra": schemas.EXTRA_SCHEMA,
}
LANE_FIELDS: Final[Mapping[str, Schema]] = {
    "id": schemas.ID_SCHEMA,
    "origin": schemas.ID_SCHEMA,
    "destination": schemas.ID_SCHEMA,
    "item": schemas.ID_SCHEMA,
    "unit_cost": _RATE,
    "measure": schemas.ID_SCHEMA,
    "must_ship": _QUANTITY,
    "capacity": _QUANTITY,
    "per": {"enum": ["item", "together"]},
    "carrier": schemas.ID_SCHEMA,
    "currency": _CURRENCY,
    "charges": {"type": "array", "items": CHARGE_SCHEMA, "maxItems": CHARGES_MAX},
    "tariff": {
        **schemas.ID_SCHEMA,
        "description": "The id of a freight tariff, instead of unit_cost.",
        "examples": ["ROAD-2026"],
    },
    "transit_days": schemas.described(
        _DAYS, "Calendar days from departure to arrival; 0 if absent.", 1
    ),
    "closes": schemas.described(
        schemas.INSTANT_SCHEMA,
        "When the departure closes; one that closed before planned_at is left out.",
        "2026-02-03T17:00:00+01:00",
    ),
    "departs": schemas.described(
        schemas.INSTANT_SCHEMA,
        "The one time when it leaves; its date is that of the origin's time zone.",
        "2026-02-03T19:30:00+01:00",
    ),
    "arrives": schemas.described(
        schemas.INSTANT_SCHEMA,
        "When it arrives, instead of transit_days; in the destination's time zone.",
        "2026-02-04T06:00:00+01:00",
    ),
    "tags": schemas.IDS_SCHEMA,
    "extra": schemas.EXTRA_SCHEMA,
}
TABLE_FIELDS: Final[Mapping[str, Mapping[str, Schema]]] = {
    "supply": SUPPLY_FIELDS,
    "demand": DEMAND_FIELDS,
    "lanes": LANE_FIELDS,
}
REQUIRED_FIELDS: Final[Mapping[str, tuple[str, ...]]] = {
    "supply": ("site", "item", "quantity"),
    "demand": ("site", "item", "quantity"),
    "lanes": ("origin", "destination"),
}
# Fields whose single value is itself an array, so that an array need not be a column of a table.
LISTED_FIELDS: Final = frozenset({"tags", "origins", "charges"})


def _plain(schema: Schema) -> Schema:
    """Return a schema without the words about it."""
    words = ("description", "examples")
    return {key: value for key, value in schema.items() if key not in words}


# Fields whose values are texts or numbers; the others hold arrays or objects.
_NUMBERS: Final = (_QUANTITY, _MONEY, _RATE, _PRIORITY, _DAYS)
_STRUCTURES: Final = LISTED_FIELDS | {"extra", "keep"}
_IDS: Final = frozenset({"id", "reference"})
FLAT_FIELDS: Final[Mapping[str, Mapping[str, FieldKind]]] = {
    table: {
        field: FieldKind.NUMBER
        if _plain(schema) in _NUMBERS
        else FieldKind.ID
        if field in _IDS
        else FieldKind.TEXT
        for field, schema in fields.items()
        if field not in _STRUCTURES
    }
    for table, fields in TABLE_FIELDS.items()
}
