"""The fields of the three big tables, each with its JSON Schema, in the order that is shown."""

from collections.abc import Mapping
from typing import Final

from service.network import value_schemas as schemas
from service.network.charge_reading import CHARGE_SCHEMA, CHARGES_MAX
from service.network.scanned import FieldKind
from service.network.value_schemas import Schema, decimal_schema

PRIORITY_MAX: Final = 9
PRIORITY_DEFAULT: Final = 5

_PRIORITY: Schema = {"type": "integer", "minimum": 1, "maximum": PRIORITY_MAX}
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
    "per": {"enum": ["item"]},
    "carrier": schemas.ID_SCHEMA,
    "currency": _CURRENCY,
    "charges": {"type": "array", "items": CHARGE_SCHEMA, "maxItems": CHARGES_MAX},
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
    "lanes": ("origin", "destination", "unit_cost"),
}
# Fields whose single value is itself an array, so that an array need not be a column of a table.
LISTED_FIELDS: Final = frozenset({"tags", "origins", "charges"})

# Fields whose values are texts or numbers; the others hold arrays or objects.
_NUMBERS: Final = (_QUANTITY, _MONEY, _RATE, _PRIORITY)
_STRUCTURES: Final = LISTED_FIELDS | {"extra", "keep"}
_IDS: Final = frozenset({"id", "reference"})
FLAT_FIELDS: Final[Mapping[str, Mapping[str, FieldKind]]] = {
    table: {
        field: FieldKind.NUMBER
        if schema in _NUMBERS
        else FieldKind.ID
        if field in _IDS
        else FieldKind.TEXT
        for field, schema in fields.items()
        if field not in _STRUCTURES
    }
    for table, fields in TABLE_FIELDS.items()
}
