"""Every documented request gets a documented answer: generated requests against the whole house.

The seed is fixed and the number small, unless ``--long``.
"""

import json
from collections.abc import Iterator
from typing import Any

import pytest
import schemathesis
from fastapi import FastAPI
from hypothesis import strategies as st
from schemathesis.config import SchemathesisConfig
from schemathesis.specs.openapi.checks import negative_data_rejection, positive_data_acceptance

from service.doors.http.app import create_app
from service.doors.http.contract import FOLDER
from service.main import working_application
from service.network.files.media_types import XLSX, ZIP
from service.settings import Settings
from tests.doors.http.fakes import await_true, client_of, real_server
from tests.files.writing import FORMS

# What a network means (that a lane's origin is one of its sites, that totals match) cannot be said
# in JSON Schema, so a network of the right form may well be refused.
EXCLUDED: list[Any] = [positive_data_acceptance]


def files_of(form: str) -> st.SearchStrategy[bytes]:
    """Return bodies in a form that no schema describes: whole, cut off, and no such file."""
    whole = FORMS[form][1](json.loads((FOLDER / "examples" / "network.json").read_bytes()))
    cut = st.integers(0, len(whole)).map(lambda length: whole[:length])
    return st.just(whole) | cut | st.binary(max_size=200)


schemathesis.openapi.media_type(ZIP, files_of("csv"))
schemathesis.openapi.media_type(XLSX, files_of("workbook"))


@pytest.fixture(scope="module")
def app(tmp_path_factory: pytest.TempPathFactory) -> Iterator[FastAPI]:
    """Start the whole house."""
    settings = Settings(data=tmp_path_factory.mktemp("house"))
    with working_application(settings) as application:
        yield create_app(application, settings)


@pytest.fixture(scope="module")
def address(app: FastAPI) -> Iterator[str]:
    """Serve the house on a real socket; return where."""
    with real_server(app) as port:
        yield f"http://127.0.0.1:{port}"


@pytest.fixture(scope="module")
def planned_run(app: FastAPI) -> str:
    """Plan the example network; return the id of its run."""
    client = client_of(app)
    network = (FOLDER / "examples" / "network.json").read_bytes()
    answer = client.post("/v1/runs", content=network, headers={"Content-Type": "application/json"})
    path = answer.headers["Location"]
    await_true(lambda: client.get(path).json()["state"] == "planned", seconds=30)
    return str(answer.json()["id"])


documented = schemathesis.openapi.from_path(FOLDER / "openapi.json")
reads = documented.include(path_regex="/v1/runs/{run_id}")
# Every boundary of every member of a network, systematically, is 3,400 requests: minutes.
without_boundaries = schemathesis.openapi.from_path(
    FOLDER / "openapi.json",
    config=SchemathesisConfig.from_dict({"phases": {"coverage": {"enabled": False}}}),
)


@without_boundaries.include(method="POST").parametrize()
def test_network_of_the_described_form_gets_a_documented_answer(
    case: schemathesis.Case[Any], address: str
) -> None:
    """Networks right and wrong: status, headers, media type and body are as described."""
    case.call_and_validate(base_url=address, excluded_checks=EXCLUDED)


@pytest.mark.long
@documented.include(method="POST").parametrize()
def test_network_at_every_boundary_gets_a_documented_answer(
    case: schemathesis.Case[Any], address: str
) -> None:
    """Likewise, with each member at, below and above each of its bounds."""
    case.call_and_validate(base_url=address, excluded_checks=EXCLUDED)


@documented.include(method="GET").parametrize()
def test_documented_request_gets_a_documented_answer(
    case: schemathesis.Case[Any], address: str
) -> None:
    """Right and wrong requests alike: status, headers, media type and body are as described."""
    case.call_and_validate(base_url=address, excluded_checks=EXCLUDED)


@reads.parametrize()
def test_read_of_a_real_run_gets_a_documented_answer(
    case: schemathesis.Case[Any], address: str, planned_run: str
) -> None:
    """With an id that exists, so that the reads come further than to 404."""
    case.path_parameters = {"run_id": planned_run}

    # The id was put in by hand, so the request may be right although it was made to be wrong.
    answer = case.call_and_validate(
        base_url=address, excluded_checks=[*EXCLUDED, negative_data_rejection]
    )

    assert answer.status_code != 404


def test_excluded_check_is_excluded_for_its_reason(app: FastAPI) -> None:
    """A network of the right form that names a site that is not there is refused."""
    client = client_of(app)
    network = (FOLDER / "examples" / "network.json").read_bytes()

    answer = client.post(
        "/v1/runs",
        content=network.replace(b'"origin": "HUB-MID"', b'"origin": "NOWHERE"'),
        headers={"Content-Type": "application/json"},
    )

    assert answer.status_code == 422
