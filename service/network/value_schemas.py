"""JSON Schemas of the values that a network definition is made of."""

from typing import Any, Final

Schema = dict[str, Any]

ROLES: Final = ("warehouse", "cross_dock", "ship_to")

ID_SCHEMA: Final[Schema] = {"type": "string", "minLength": 1, "maxLength": 64}
NAME_SCHEMA: Final[Schema] = {"type": "string", "minLength": 1, "maxLength": 200}
NOTE_SCHEMA: Final[Schema] = {"type": "string", "maxLength": 2000}
IDS_SCHEMA: Final[Schema] = {"type": "array", "items": ID_SCHEMA, "uniqueItems": True}
EXTRA_SCHEMA: Final[Schema] = {
    "type": "object",
    "maxProperties": 16,
    "propertyNames": ID_SCHEMA,
    "additionalProperties": NOTE_SCHEMA,
}
INSTANT_SCHEMA: Final[Schema] = {"type": "string", "format": "date-time"}
DATE_SCHEMA: Final[Schema] = {"type": "string", "format": "date"}


def described(schema: Schema, what: str, example: object) -> Schema:
    """Return a schema with a sentence about what it means, and an example."""
    return {**schema, "description": what, "examples": [example]}


def dates_schema(most: int) -> Schema:
    """Return the schema of an array of 1 to ``most`` different dates."""
    dates: Schema = {"type": "array", "items": DATE_SCHEMA, "minItems": 1}
    return dates | {"maxItems": most, "uniqueItems": True}


def decimal_schema(decimals_max: int, *, signed: bool) -> Schema:
    """Return the schema of a decimal: a number, or better its exact digits as text."""
    number_pattern = rf"(0|[1-9][0-9]*)(\.[0-9]{{1,{decimals_max}}})?"
    # A zero is not negative, however it is written.
    zero_pattern = rf"-0(\.0{{1,{decimals_max}}})?"
    pattern = f"^-?{number_pattern}$" if signed else f"^({number_pattern}|{zero_pattern})$"
    number: Schema = {"type": "number"} if signed else {"type": "number", "minimum": 0}
    return {"anyOf": [{"type": "string", "pattern": pattern, "maxLength": 32}, number]}


RATE_SCHEMA = decimal_schema(6, signed=False)
SIGNED_SCHEMA = decimal_schema(6, signed=True)
QUANTITY_SCHEMA = decimal_schema(3, signed=False)
ROLES_SCHEMA: Schema = {
    "type": "array",
    "items": {"enum": list(ROLES)},
    "minItems": 1,
    "uniqueItems": True,
}
