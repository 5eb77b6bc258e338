"""The JSON Schema (2020-12) of a network definition, made of what the readers are made of.

A schema cannot say that a site is known or that totals agree: what it accepts can still be refused.
What it refuses is never accepted, with one exception that JSON itself makes: a number's digits
are gone when a validator looks at it, so only texts show how many decimals they have.
"""

from typing import Final

from pydantic import BaseModel

from service.network.definition import RULE_PARTS, Control, Head, ItemPart, SitePart
from service.network.money_definition import ExchangeRatePart, TariffPart
from service.network.table_fields import REQUIRED_FIELDS, TABLE_FIELDS
from service.network.value_schemas import Schema

DIALECT: Final = "https://json-schema.org/draft/2020-12/schema"
TITLE: Final = "Network definition"


def network_schema() -> Schema:
    """Return the schema, the same on every call."""
    definitions: Schema = {}
    head = _part(Head, definitions)
    rules = [
        _named(part, definitions, {"rule": {"const": name}}) for name, part in RULE_PARTS.items()
    ]
    tables = {name: _table(name) for name in TABLE_FIELDS}
    return {
        "$schema": DIALECT,
        "title": TITLE,
        "type": "object",
        "properties": {
            **head["properties"],
            "items": {"type": "array", "items": _named(ItemPart, definitions)},
            "sites": {"type": "array", "items": _named(SitePart, definitions)},
            **tables,
            "rules": {"anyOf": [{"type": "array", "items": {"anyOf": rules}}, {"type": "null"}]},
            "exchange_rates": _optional_list(ExchangeRatePart, definitions),
            "tariffs": _optional_list(TariffPart, definitions),
            "control": {"anyOf": [_named(Control, definitions), {"type": "null"}]},
        },
        "required": [*head["required"], "items", "sites", *TABLE_FIELDS],
        "additionalProperties": False,
        "$defs": dict(sorted(definitions.items())),
    }


def _part(part: type[BaseModel], definitions: Schema) -> Schema:
    """Return the schema of a part; those of the parts inside it go to ``definitions``."""
    schema = part.model_json_schema(by_alias=True, ref_template="#/$defs/{model}")
    definitions |= schema.pop("$defs", {})
    return _plain(schema)


def _named(part: type[BaseModel], definitions: Schema, override: Schema | None = None) -> Schema:
    """Put the schema of a part under its name and return a reference to it."""
    schema = _part(part, definitions)
    schema["properties"] |= override or {}
    definitions[part.__name__] = schema
    return {"$ref": f"#/$defs/{part.__name__}"}


def _optional_list(part: type[BaseModel], definitions: Schema) -> Schema:
    """Return the schema of an array of parts that may be absent."""
    array = {"type": "array", "items": _named(part, definitions)}
    return {"anyOf": [array, {"type": "null"}]}


def _plain(schema: Schema) -> Schema:
    """Return a schema without the titles and defaults that say nothing to a sender."""
    properties = {
        name: {key: value for key, value in field.items() if key not in ("title", "default")}
        for name, field in schema["properties"].items()
    }
    return {**schema, "properties": properties}


def _table(name: str) -> Schema:
    """Return the schema of one of the big tables, in each form that it can have."""
    fields, required = TABLE_FIELDS[name], REQUIRED_FIELDS[name]
    row: Schema = {
        "type": "object",
        "properties": {
            field: schema if field in required else _nullable(schema)
            for field, schema in fields.items()
        },
        "required": list(required),
        "additionalProperties": False,
    }
    columns: Schema = {
        "type": "object",
        "properties": {
            field: {"type": "array", "items": schema if field in required else _nullable(schema)}
            for field, schema in fields.items()
        },
        "required": list(required),
        "additionalProperties": False,
    }
    forms = [{"type": "array", "items": row}, columns]
    if name == "lanes":
        # A tariff may stand instead of the cost.
        one_cost = [{"required": ["unit_cost"]}, {"required": ["tariff"]}]
        row["anyOf"], columns["anyOf"] = one_cost, one_cost
        table = _cost_table()
        forms += [table, {"type": "array", "items": table}]
    return {"anyOf": forms}


def _cost_table() -> Schema:
    """Return the schema of a cost table: ids once, further fields as tables or as one value."""
    fields = TABLE_FIELDS["lanes"]
    sites: Schema = {"type": "array", "items": fields["origin"], "uniqueItems": True}
    further = {
        field: {"anyOf": [_grid(schema), _nullable(schema)]}
        for field, schema in fields.items()
        if field not in ("origin", "destination")
    }
    return {
        "type": "object",
        "properties": {"origins": sites, "destinations": sites, **further},
        "required": ["origins", "destinations", "unit_cost"],
        "additionalProperties": False,
    }


def _grid(schema: Schema) -> Schema:
    """Return the schema of a table with one value, or null, for each pair of sites."""
    return {"type": "array", "items": {"type": "array", "items": _nullable(schema)}}


def _nullable(schema: Schema) -> Schema:
    """Return a schema that also takes null, for absent."""
    return {"anyOf": [*schema.get("anyOf", [schema]), {"type": "null"}]}
