"""Writes ``openapi/``: the interface description, the schema of the network, and examples.

``python -m service.doors.http.contract`` starts a real service of its own, posts the example
network, and keeps what the service answered: an example that was made up would sooner or later be
wrong. ``python -m service.doors.http.contract --release`` also promises the interface as it is now:
from then on a change that breaks clients fails the tests.
"""

import os
import re
import subprocess
import sys
import tempfile
import time
import urllib.request
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, Final

import orjson

import service
from service.doors.http.app import described_app
from service.doors.http.openapi import describe, read_examples
from service.network.schema import network_schema

FOLDER: Final = Path(service.__path__[0]).parent / "openapi"
SECONDS_MAX: Final = 60.0

# What differs between two answers to the same question: who it was, when, and on what machine.
_RUN_ID: Final = re.compile(r"run_[0-9a-v]{26}")
_MOMENT: Final = re.compile(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d\.\d{6}Z")
_CHANGING_MEMBERS: Final = frozenset(
    {"hash", "previous", "payload_digest", "salt", "token", "certificate_digest", "seconds"}
)


def settled(document: Any) -> Any:  # noqa: ANN401 - any JSON value
    """Return ``document`` without what differs each time, so that two can be compared."""
    if isinstance(document, dict):
        return {
            name: "different" if name in _CHANGING_MEMBERS or name == "versions" else settled(value)
            for name, value in document.items()
        }
    if isinstance(document, list):
        return [settled(value) for value in document]
    if isinstance(document, str):
        return _MOMENT.sub("a moment", _RUN_ID.sub("a run", document))
    return document


def real_examples(network: bytes) -> dict[str, Any]:
    """Return what a real service answers about a run of ``network``."""
    with _service() as address:
        run = _await_run(address, _post(f"{address}/v1/runs", network))
        here = f"{address}/v1/runs/{run['id']}"
        return {
            "network": orjson.loads(network),
            "run": run,
            "plan": _get(f"{here}/plan"),
            "certificate": _get(f"{here}/certificate"),
            "history": _get(f"{here}/history"),
        }


@contextmanager
def _service() -> Iterator[str]:
    """Run a service in a folder of its own on a free port; yield its address."""
    with tempfile.TemporaryDirectory() as folder:
        process = subprocess.Popen(
            [sys.executable, "-c", "from service.main import main; main()", "serve", "--port", "0"],
            env={**os.environ, "LANEWRIGHT_DATA": folder},
            stderr=subprocess.PIPE,
            text=True,
        )
        output = process.stderr
        assert output is not None  # noqa: S101 - a pipe was asked for
        try:
            for line in output:
                if found := re.search(r"http://127\.0\.0\.1:\d+", line):
                    yield found[0]
                    return
            raise RuntimeError("the service did not start")
        finally:
            process.terminate()
            process.communicate(timeout=SECONDS_MAX)


def _post(address: str, body: bytes) -> dict[str, Any]:
    headers = {"Content-Type": "application/json"}
    return _answer(urllib.request.Request(address, data=body, headers=headers))  # noqa: S310 - our own service


def _get(address: str) -> dict[str, Any]:
    return _answer(urllib.request.Request(address))  # noqa: S310 - our own service


def _answer(request: urllib.request.Request) -> dict[str, Any]:
    with urllib.request.urlopen(request, timeout=SECONDS_MAX) as answer:  # noqa: S310 - likewise
        document: dict[str, Any] = orjson.loads(answer.read())
        return document


def _await_run(address: str, run: dict[str, Any]) -> dict[str, Any]:
    """Ask until the run is planned."""
    until = time.monotonic() + SECONDS_MAX
    while run["state"] in {"waiting", "running"} and time.monotonic() < until:
        time.sleep(0.1)
        run = _get(f"{address}{run['links']['self']}")
    if run["state"] != "planned":
        raise RuntimeError(f"the example is {run['state']}: {run['detail']}")
    return run


def pretty(document: Any) -> bytes:  # noqa: ANN401 - any JSON value
    """Return ``document`` as it stands in the repository."""
    return orjson.dumps(document, option=orjson.OPT_INDENT_2) + b"\n"


def promise(description: Any) -> Any:  # noqa: ANN401 - any JSON value
    """Return what of an interface description binds: its form, without words and examples."""
    if isinstance(description, dict):
        return {
            name: promise(value)
            for name, value in description.items()
            # A property may be called like a keyword; then its value is a schema.
            if not (
                name in {"description", "summary", "title", "example", "examples"}
                and not (isinstance(value, dict) and {"type", "$ref", "anyOf"} & set(value))
            )
        }
    if isinstance(description, list):
        return [promise(value) for value in description]
    return description


def main() -> None:
    """Write what has changed."""
    examples_folder = FOLDER / "examples"
    former = read_examples(examples_folder)
    for name, example in real_examples((examples_folder / "network.json").read_bytes()).items():
        # To keep one that says the same spares everybody a change without a meaning.
        if name not in former or settled(former[name]) != settled(example):
            (examples_folder / f"{name}.json").write_bytes(pretty(example))
    description = describe(described_app(), read_examples(examples_folder))
    (FOLDER / "openapi.json").write_bytes(pretty(description))
    (FOLDER / "network.schema.json").write_bytes(pretty(network_schema()))
    if "--release" in sys.argv[1:] or not (FOLDER / "promised.json").exists():
        (FOLDER / "promised.json").write_bytes(pretty(promise(description)))


if __name__ == "__main__":
    main()
