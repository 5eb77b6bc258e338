"""The interface description (OpenAPI 3.1): what FastAPI knows, and what only we know.

The body of ``POST /v1/runs`` is never parsed by a model of this door, so its schema comes from
``network/definition.py``; the examples are real documents from ``openapi/examples``.
"""

from collections.abc import Mapping
from importlib.metadata import version
from pathlib import Path
from typing import Any, Final

import orjson
from fastapi import FastAPI
from fastapi.openapi.utils import get_openapi

import service
from service.doors.http.schemas import ProblemOut
from service.network.files.media_types import JSON, XLSX, ZIP
from service.network.schema import network_schema

DESCRIPTION: Final = """\
Lanewright decides shipment allocation: which warehouse ships how much of what, over which lane, to
which ship-to, at least landed cost and least shortage by priority, and proves every plan.

* Quantities are in the unit of their item unless a unit stands beside them; money is in the
  currency of the network. Both are decimal strings in answers, and exact.
* Times are RFC 3339, in UTC; dates are ISO 8601; currencies ISO 4217.
* Everything that goes wrong is `application/problem+json` (RFC 9457); the `type` of a problem is
  the path of a page that explains it. All faults of an input are reported at once.
* Answers carry `X-Request-ID`. Unknown members of answers must be ignored by clients; unknown
  members, parameters and options of requests are refused.
* There are no keys yet: the service listens on the loopback interface only.
"""
NETWORK_FORMS: Final = """\
The network, plain, or packed as a whole with gzip (RFC 1952) or zstd (RFC 8878) and the header
Content-Encoding saying so. As JSON in UTF-8; as a zip with one file for each table, `TABLE.csv`,
`TABLE.parquet` or `TABLE.arrow` (each may end in `.gz` or `.zst`), beside which `network.json` may
hold the parts that have no file; or as a workbook with one sheet for each table. `GET
/v1/template.xlsx` is such a workbook, with notes on every column.

Columns are called like fields: `keep.quantity` is a field inside a field, `extra.NAME` a pair,
`handling_cost.ITEM` a cost by item, and a cell with several texts has `|` between them. A fault in
a file has its place as `lanes.csv!row 17,unit_cost`, where the header is row 1.
"""
TAGS: Final = [
    {"name": "runs", "description": "Networks that are planned, and what became of them."},
    {"name": "health", "description": "For whoever runs the service."},
]
EXAMPLE_NAMES: Final = ("network", "run", "plan", "certificate", "history")


def examples_folder() -> Path:
    """Return where the examples are: in the installed package, else in the work tree."""
    packed = Path(__file__).parent / "examples"
    return packed if packed.is_dir() else Path(service.__path__[0]).parent / "openapi" / "examples"


def read_examples(folder: Path) -> dict[str, Any]:
    """Return the example documents by name."""
    return {
        name: orjson.loads((folder / f"{name}.json").read_bytes())
        for name in EXAMPLE_NAMES
        if (folder / f"{name}.json").exists()
    }


def describe(app: FastAPI, examples: Mapping[str, Any]) -> dict[str, Any]:
    """Return the interface description of ``app`` with ``examples`` in their places."""
    document = get_openapi(
        title="Lanewright",
        version=version("lanewright"),
        openapi_version="3.1.0",
        summary="Shipment allocation with proof.",
        description=DESCRIPTION,
        routes=app.routes,
        tags=TAGS,
        servers=[{"url": "/", "description": "This service."}],
        license_info={"name": "Apache-2.0", "identifier": "Apache-2.0"},
    )
    # Said outright: there are no keys, and a reader shall not take that for an oversight.
    document["security"] = []
    schemas = document["components"]["schemas"]
    # FastAPI's own form of a faulty request, which this door never answers with.
    schemas.pop("HTTPValidationError", None)
    schemas.pop("ValidationError", None)
    problem = ProblemOut.model_json_schema(ref_template="#/components/schemas/{model}")
    schemas.update(problem.pop("$defs"))
    schemas["ProblemOut"] = problem
    network, parts = _embedded(network_schema())
    schemas.update(parts)
    schemas["Network"] = network
    operations = {
        operation["operationId"]: operation
        for path in document["paths"].values()
        for operation in path.values()
    }
    operations["create_run"]["requestBody"] = {
        "required": True,
        # In words and not as a header parameter, since the header must fit the bytes: a tool that
        # fills in parameters would announce a packing that it does not do.
        "description": NETWORK_FORMS,
        "content": {
            JSON: {"schema": {"$ref": "#/components/schemas/Network"}},
            # OpenAPI 3.1 describes bytes by their media type alone.
            ZIP: {"schema": {}},
            XLSX: {"schema": {}},
        },
    }
    _place_examples(operations, examples)
    return document


def _embedded(schema: dict[str, Any]) -> tuple[dict[str, Any], dict[str, Any]]:
    """Return a stand-alone schema and its parts as components of the description."""
    parts = {f"Network{name}": part for name, part in schema.get("$defs", {}).items()}
    whole = {key: value for key, value in schema.items() if key not in {"$defs", "$id", "$schema"}}
    network: dict[str, Any] = _moved(whole)
    return network, {name: _moved(part) for name, part in parts.items()}


def _moved(value: Any) -> Any:  # noqa: ANN401 - any JSON value
    """Return ``value`` with its references pointing into the components."""
    if isinstance(value, dict):
        return {
            key: f"#/components/schemas/Network{item.rpartition('/')[2]}"
            if key == "$ref" and isinstance(item, str)
            else _moved(item)
            for key, item in value.items()
        }
    if isinstance(value, list):
        return [_moved(item) for item in value]
    return value


def _place_examples(operations: Mapping[str, Any], examples: Mapping[str, Any]) -> None:
    """Put each example where a reader of the description looks for it."""

    def answer(operation_id: str, status: str, media_type: str = "application/json") -> Any:  # noqa: ANN401 - a part of the description
        return operations[operation_id]["responses"][status]["content"][media_type]

    places = {
        "network": operations["create_run"]["requestBody"]["content"]["application/json"],
        "plan": answer("read_plan", "200"),
        "certificate": answer("read_certificate", "200"),
        "history": answer("read_history", "200"),
    }
    for name, place in places.items():
        if name in examples:
            place["example"] = examples[name]
    if "run" in examples:
        answer("read_run", "200")["example"] = examples["run"]
        answer("create_run", "202")["example"] = _as_accepted(examples["run"])
    if "network" in examples:
        answer("read_network", "200")["example"] = examples["network"]
    answer("read_liveness", "200")["example"] = {"alive": True}
    answer("read_readiness", "200")["example"] = {"ready": True}


def _as_accepted(run: Mapping[str, Any]) -> dict[str, Any]:
    """Return a finished run as it was when it was accepted."""
    later = {"started_at", "finished_at", "plan_digest", "certificate_digest"}
    accepted = {name: None if name in later else value for name, value in run.items()}
    links = {
        name: path if name in {"self", "network", "history"} else None
        for name, path in run["links"].items()
    }
    return {**accepted, "state": "waiting", "attempt": 0, "links": links}
