"""The committed interface is the one that is served, its examples are real, its promises kept."""

from pathlib import Path
from typing import Any

import jsonschema_rs
import orjson
import pytest

from service.doors.http.app import described_app
from service.doors.http.contract import FOLDER, promise, real_examples, settled
from service.doors.http.openapi import EXAMPLE_NAMES, describe, read_examples
from service.doors.http.problem_kinds import KINDS
from service.network.schema import network_schema
from tests.contract.breaking import breaking_changes

REMEDY = "run: python -m service.doors.http.contract"
METHODS = {"get", "post"}


def committed(name: str) -> Any:  # noqa: ANN401 - any JSON value
    """Return a committed document."""
    return orjson.loads((FOLDER / name).read_bytes())


@pytest.fixture(scope="module")
def description() -> Any:  # noqa: ANN401 - any JSON value
    """Return the interface description as the code makes it."""
    return describe(described_app(), read_examples(FOLDER / "examples"))


def operations(description: Any) -> list[tuple[str, Any]]:  # noqa: ANN401 - any JSON value
    """Return (name, operation) of every operation."""
    return [
        (f"{method.upper()} {path}", operation)
        for path, item in description["paths"].items()
        for method, operation in item.items()
        if method in METHODS
    ]


def resolved(description: Any, schema: Any) -> Any:  # noqa: ANN401 - any JSON value
    """Return ``schema`` with the components that it refers to, to be used alone."""
    return {**schema, "components": description["components"]}


def test_committed_description_is_the_one_that_is_served(description: Any) -> None:  # noqa: ANN401 - any JSON value
    """Clients are generated from the file; it must not lag behind the code."""
    assert committed("openapi.json") == orjson.loads(orjson.dumps(description)), REMEDY


def test_committed_schema_of_the_network_is_the_one_that_is_served() -> None:
    """Likewise for whoever writes networks."""
    assert committed("network.schema.json") == orjson.loads(orjson.dumps(network_schema())), REMEDY


def test_examples_are_what_a_real_service_answers() -> None:
    """They are posted, planned and read through a service of their own, and compared."""
    network = (FOLDER / "examples" / "network.json").read_bytes()

    answered = real_examples(network)

    kept = read_examples(FOLDER / "examples")
    assert set(kept) == set(EXAMPLE_NAMES)
    for name in EXAMPLE_NAMES:
        assert settled(kept[name]) == settled(answered[name]), f"{name}: {REMEDY}"


def test_plan_of_the_example_adds_up() -> None:
    """A reader who checks it with a pencil must find it right: the sum of the lines, in cents."""
    plan = committed("examples/plan.json")

    cents = sum(round(float(line["cost"]) * 100) for line in plan["plan_lines"])

    assert cents == round(float(plan["total_cost"]) * 100)


def test_examples_are_of_the_form_that_is_described(description: Any) -> None:  # noqa: ANN401 - any JSON value
    """The network by its schema, everything else by that of the operation that answers it."""
    jsonschema_rs.validator_for(network_schema()).validate(committed("examples/network.json"))
    checked = 0
    for name, operation in operations(description):
        bodies = [operation["requestBody"]] if "requestBody" in operation else []
        for part in [*bodies, *operation["responses"].values()]:
            for content in part.get("content", {}).values():
                values = [each["value"] for each in content.get("examples", {}).values()]
                values += [content["example"]] if "example" in content else []
                schema = resolved(description, content["schema"])
                for value in values:
                    found = jsonschema_rs.validator_for(schema).iter_errors(value)
                    assert [f"{name}: {error}" for error in found] == []
                    checked += 1
    assert checked > 100


def test_every_operation_is_described(description: Any) -> None:  # noqa: ANN401 - any JSON value
    """Summary, words, an example of every answer in JSON, and every problem that can happen."""
    everywhere = {"400", "403", "414", "421", "422", "431", "500"}
    for name, operation in operations(description):
        assert operation["operationId"].count("_") >= 1, name
        assert len(operation["description"]) > 40, name
        assert everywhere <= set(operation["responses"]), name
        for status, response in operation["responses"].items():
            assert response["description"], (name, status)
            for media_type, content in response.get("content", {}).items():
                if media_type.endswith("json"):
                    assert "example" in content or "examples" in content, (name, status)
        for parameter in operation.get("parameters", []):
            assert parameter["description"], (name, parameter["name"])


def test_every_kind_of_problem_is_an_answer_of_some_operation(description: Any) -> None:  # noqa: ANN401 - any JSON value
    """A kind that nothing can answer is dead; not-found and method belong to no operation."""
    described = {
        slug
        for _, operation in operations(description)
        for response in operation["responses"].values()
        for content in response.get("content", {}).values()
        for slug in content.get("examples", {})
    }

    assert set(KINDS) - described == {"not-found", "method-not-allowed"}


def test_description_names_no_framework_error(description: Any) -> None:  # noqa: ANN401 - any JSON value
    """Every fault has our own form."""
    assert "HTTPValidationError" not in orjson.dumps(description).decode()


def test_nothing_that_was_promised_is_broken(description: Any) -> None:  # noqa: ANN401 - any JSON value
    """A client of the last release still works.

    What breaks it needs a new major version in the path; only a release may write the promise anew
    (``--release``).
    """
    assert breaking_changes(committed("promised.json"), description) == []


def test_promise_holds_all_that_binds() -> None:
    """Words and examples are left out of it, a property called like them is not."""
    document = {
        "description": "words",
        "properties": {"description": {"type": "string", "description": "words"}},
        "examples": {"a": 1},
    }

    assert promise(document) == {"properties": {"description": {"type": "string"}}}


def test_settled_documents_differ_only_in_what_matters() -> None:
    """Two answers to one question are alike; another amount is another answer."""
    one = {"id": "run_" + "0" * 26, "at": "2026-02-03T15:00:00.250000Z", "cost": "1", "hash": "a"}
    same = {"id": "run_" + "1" * 26, "at": "2027-02-03T15:00:00.250000Z", "cost": "1", "hash": "b"}

    assert settled(one) == settled(same)
    assert settled(one) != settled({**same, "cost": "2"})


def test_folder_holds_what_is_documented() -> None:
    """No document lies about that nothing generates or tests."""
    names = {path.relative_to(FOLDER).as_posix() for path in Path(FOLDER).rglob("*.json")}

    examples = {f"examples/{name}.json" for name in EXAMPLE_NAMES}
    assert names == {"openapi.json", "network.schema.json", "promised.json"} | examples
