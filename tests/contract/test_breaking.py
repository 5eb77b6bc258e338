"""The rules by which a change of the interface breaks clients: each tells, and none cries wolf."""

import copy
from collections.abc import Callable
from typing import Any

import pytest

from tests.contract.breaking import breaking_changes

Json = Any


def description() -> Json:
    """Return a small interface with everything that the rules look at."""
    return {
        "paths": {
            "/things": {
                "post": {
                    "operationId": "create_thing",
                    "parameters": [
                        {"in": "query", "name": "mode", "schema": {"enum": ["a", "b"]}},
                        {
                            "in": "query",
                            "name": "count",
                            "schema": {"type": "integer", "maximum": 9},
                        },
                    ],
                    "requestBody": {
                        "required": True,
                        "content": {
                            "application/json": {"schema": {"$ref": "#/components/schemas/Thing"}}
                        },
                    },
                    "responses": {
                        "202": {
                            "headers": {"Location": {}},
                            "content": {
                                "application/json": {
                                    "schema": {"$ref": "#/components/schemas/Answer"}
                                }
                            },
                        },
                        "422": {"content": {}},
                    },
                }
            }
        },
        "components": {
            "schemas": {
                "Thing": {
                    "type": "object",
                    "additionalProperties": False,
                    "required": ["id"],
                    "properties": {
                        "id": {"type": "string", "pattern": "^a"},
                        "size": {"anyOf": [{"type": "number"}, {"type": "null"}]},
                        "parts": {"type": "array", "items": {"$ref": "#/components/schemas/Thing"}},
                    },
                },
                "Answer": {
                    "type": "object",
                    "required": ["id", "state"],
                    "properties": {
                        "id": {"type": "string"},
                        "state": {"enum": ["waiting"]},
                        "detail": {"anyOf": [{"type": "string"}]},
                    },
                },
            }
        },
    }


def post(document: Json) -> Json:
    """Return the one operation."""
    return document["paths"]["/things"]["post"]


def sent(document: Json) -> Json:
    """Return the schema of what clients send."""
    return document["components"]["schemas"]["Thing"]


def received(document: Json) -> Json:
    """Return the schema of what clients receive."""
    return document["components"]["schemas"]["Answer"]


HARMLESS: dict[str, Callable[[Json], object]] = {
    "nothing": lambda _: None,
    "another path": lambda d: d["paths"].update({"/more": {"get": {"responses": {}}}}),
    "an optional parameter": lambda d: post(d)["parameters"].append(
        {"in": "query", "name": "new", "schema": {"type": "string"}}
    ),
    "a wider bound": lambda d: post(d)["parameters"][1]["schema"].update(maximum=10),
    "a value that may be sent": lambda d: post(d)["parameters"][0]["schema"]["enum"].append("c"),
    "a member that may be sent": lambda d: sent(d)["properties"].update(new={"type": "string"}),
    "a member less required": lambda d: sent(d)["required"].clear(),
    "a type that may be sent": lambda d: sent(d)["properties"]["id"].pop("pattern"),
    "a member more received": lambda d: received(d)["properties"].update(new={"type": "string"}),
    "a state more received": lambda d: received(d)["properties"]["state"]["enum"].append("running"),
    "a problem more": lambda d: post(d)["responses"].update({"503": {}}),
    "a problem less": lambda d: post(d)["responses"].pop("422"),
    "a body that is optional": lambda d: post(d)["requestBody"].update(required=False),
}

HARMFUL: dict[str, Callable[[Json], object]] = {
    "a path less": lambda d: d["paths"].pop("/things"),
    "a method less": lambda d: d["paths"]["/things"].pop("post"),
    "another operation id": lambda d: post(d).update(operationId="make_thing"),
    "a parameter less": lambda d: post(d)["parameters"].pop(),
    "a required parameter": lambda d: post(d)["parameters"].append(
        {"in": "query", "name": "new", "required": True}
    ),
    "a parameter required": lambda d: post(d)["parameters"][0].update(required=True),
    "a value refused": lambda d: post(d)["parameters"][0]["schema"]["enum"].remove("a"),
    "a narrower bound": lambda d: post(d)["parameters"][1]["schema"].update(maximum=8),
    "a new bound": lambda d: post(d)["parameters"][1]["schema"].update(minimum=0),
    "another pattern": lambda d: sent(d)["properties"]["id"].update(pattern="^b"),
    "a type refused": lambda d: sent(d)["properties"]["id"].update(type="integer"),
    "a member refused": lambda d: sent(d)["properties"].pop("size"),
    "a member required": lambda d: sent(d)["required"].append("size"),
    "an alternative refused": lambda d: sent(d)["properties"]["size"]["anyOf"].pop(),
    "a media type refused": lambda d: post(d)["requestBody"].update(content={"text/csv": {}}),
    "an answer less": lambda d: post(d)["responses"].pop("202"),
    "a header less": lambda d: post(d)["responses"]["202"]["headers"].clear(),
    "a media type less": lambda d: post(d)["responses"]["202"]["content"].clear(),
    "a member gone": lambda d: received(d)["properties"].pop("detail"),
    "a member not sure": lambda d: received(d)["required"].remove("state"),
    "a member of another type": lambda d: received(d)["properties"]["id"].update(type="integer"),
    "an alternative more": lambda d: received(d)["properties"]["detail"]["anyOf"].append(
        {"type": "null"}
    ),
}


@pytest.mark.parametrize("name", HARMLESS)
def test_harmless_change_is_none(name: str) -> None:
    """The interface must be able to grow."""
    latter = copy.deepcopy(description())
    HARMLESS[name](latter)

    assert breaking_changes(description(), latter) == []


@pytest.mark.parametrize("name", HARMFUL)
def test_harmful_change_is_told(name: str) -> None:
    """Each of these stops a client that worked."""
    latter = copy.deepcopy(description())
    HARMFUL[name](latter)

    assert breaking_changes(description(), latter)


def test_a_body_that_becomes_required_is_told() -> None:
    """Whoever sent none is refused now."""
    former = copy.deepcopy(description())
    post(former)["requestBody"]["required"] = False

    assert breaking_changes(former, description()) == ["POST /things: a body is required now"]
