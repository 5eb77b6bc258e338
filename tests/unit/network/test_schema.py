"""The JSON Schema: what is accepted is valid, and what it refuses is refused."""

import json
from pathlib import Path
from typing import Any

import jsonschema_rs
import pytest

from service.network.schema import network_schema
from service.network.table_fields import REQUIRED_FIELDS, TABLE_FIELDS
from tests.network_samples import check, found, sound

VALIDATOR = jsonschema_rs.validator_for(network_schema())


def test_the_schema_is_one_of_its_dialect() -> None:
    """Tools refuse a schema that is none."""
    jsonschema_rs.meta.validate(network_schema())
    assert json.dumps(network_schema()) == json.dumps(network_schema())


def test_the_sound_network_is_valid_in_every_form() -> None:
    """Rows, columns and cost tables."""
    document = sound()
    assert VALIDATOR.is_valid(document)

    for name in ("supply", "demand", "lanes"):
        rows = document[name]
        names = {field for row in rows for field in row}
        document[name] = {field: [row.get(field) for row in rows] for field in names}
    assert VALIDATOR.is_valid(document)
    table = {"origins": ["X"], "destinations": ["Y"], "unit_cost": [["1"]], "tags": ["a"]}
    document["lanes"] = table
    assert VALIDATOR.is_valid(document)
    document["lanes"] = [table, table | {"capacity": [[None]], "carrier": None}]
    assert VALIDATOR.is_valid(document)


@pytest.mark.parametrize(
    "change",
    [
        {"format": 2},
        {"currency": "euro"},
        {"strange": 1},
        {"items": [{"id": "A"}]},
        {"items": [{"id": "", "unit": "bag"}]},
        {"items": [{"id": "A", "unit": "bag", "weight_kg": "1e3"}]},
        {"items": [{"id": "A", "unit": "bag", "step": "0.0001"}]},
        {"items": [{"id": "A", "unit": "bag", "due": 1}]},
        {"sites": [{"id": "A", "roles": []}]},
        {"sites": [{"id": "A", "roles": ["depot"]}]},
        {"supply": [{"site": "Y", "item": "BRINE"}]},
        {"supply": [{"site": "Y", "item": "BRINE", "quantity": "-1"}]},
        {"supply": [{"site": "Y", "item": "BRINE", "quantity": "1", "keep": 3}]},
        {"demand": {"site": ["YARD-07"], "item": ["BRINE"]}},
        {"demand": [{"site": "YARD-07", "item": "BRINE", "quantity": 1, "priority": 10}]},
        {"lanes": [{"origin": "X", "destination": "YARD-07"}]},
        {"lanes": {"origins": ["X"], "destinations": ["YARD-07"]}},
        {"rules": [{"rule": "vehicles", "id": "v"}]},
        {"rules": [{"rule": "closure", "id": "c", "lanes": {"ids": []}}]},
        {"control": {"demand_rows": -1}},
    ],
)
def test_what_the_schema_refuses_is_refused(change: dict[str, Any], tmp_path: Path) -> None:
    """A client that checks first must not be told two things."""
    document = sound() | change

    assert not VALIDATOR.is_valid(document)
    assert found(check(document, tmp_path))


@pytest.mark.parametrize("table", sorted(TABLE_FIELDS))
def test_required_fields_are_fields(table: str) -> None:
    """The two lists are kept apart."""
    assert set(REQUIRED_FIELDS[table]) <= set(TABLE_FIELDS[table])
