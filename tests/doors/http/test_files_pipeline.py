"""A network as files through the whole house: taken in, planned, and handed out again."""

import gzip
import io
import json
import os
import sys
import threading
import zipfile
from collections.abc import Iterator
from decimal import Decimal
from pathlib import Path
from types import FrameType
from typing import Self

import openpyxl
import pyarrow.parquet as pq
import pytest
from fastapi.testclient import TestClient

from service.doors.http.app import create_app
from service.doors.template_workbook import EXAMPLE, write_template
from service.main import working_application
from service.network.files.definition_files import read_files
from service.network.files.json import read_json
from service.network.files.media_types import JSON, PARQUET, XLSX, ZIP
from service.network.files.unpack import unpack
from service.network.intake import intake
from service.network.reading import read_network
from service.settings import Settings
from tests.doors.http.fakes import await_true, client_of, codes
from tests.files.reading import files
from tests.files.writing import FORMS, take_in, zipped

BODY_MAX = 1 << 20


@pytest.fixture(scope="module")
def client(tmp_path_factory: pytest.TempPathFactory) -> Iterator[TestClient]:
    """Start a service with everything in it."""
    settings = Settings(
        data=tmp_path_factory.mktemp("house"),
        body_wire_bytes_max=BODY_MAX,
        body_unpacked_bytes_max=BODY_MAX,
    )
    with (
        working_application(settings) as application,
        client_of(create_app(application, settings)) as opened,
    ):
        yield opened


def planned(client: TestClient, body: bytes, **headers: str) -> str:
    """Post a body; return the path of its run once it is planned."""
    answer = client.post("/v1/runs", content=body, headers=headers)
    assert answer.status_code == 202, answer.text
    path = answer.headers["Location"]
    await_true(lambda: client.get(path).json()["state"] == "planned", seconds=30)
    return str(path)


def test_the_template_is_planned_and_comes_back(client: TestClient, tmp_path: Path) -> None:
    """From the workbook that everybody starts with to the workbook of the plan."""
    write_template(tmp_path / "network.xlsx")
    body = (tmp_path / "network.xlsx").read_bytes()

    path = planned(
        client, gzip.compress(body), **{"Content-Type": XLSX, "Content-Encoding": "gzip"}
    )

    received = client.get(f"{path}/network?form=received")
    assert (received.headers["Content-Type"], received.content) == (XLSX, body)
    book = openpyxl.load_workbook(
        io.BytesIO(client.get(f"{path}/plan", headers={"Accept": XLSX}).content)
    )
    # 700 by the direct lane at 0.215, the rest over the hub; 1,200 + 250 bags are at hand.
    assert book["order_lines"]["G2"].value == 880
    table = client.get(f"{path}/plan?table=order_lines", headers={"Accept": PARQUET}).content
    assert pq.read_table(io.BytesIO(table)).column("served").to_pylist() == [Decimal(880)]


def test_every_form_is_one_network(client: TestClient) -> None:
    """One digest, whatever was sent; what was received comes back as it was."""
    digests = set()
    for media_type, write in (*FORMS.values(), (JSON, lambda d: json.dumps(d).encode())):
        document = json.loads(json.dumps(EXAMPLE))
        if media_type == JSON:
            document["demand"][0]["priority"] = 2
        body = write(document)
        path = planned(client, body, **{"Content-Type": media_type})
        digests.add(client.get(path).json()["network_digest"])
        received = client.get(f"{path}/network?form=received")
        assert (received.headers["Content-Type"], received.content) == (media_type, body)

    assert len(digests) == 1


def test_faults_of_files_name_file_row_and_column(client: TestClient) -> None:
    """A problem of RFC 9457, like any other network's."""
    body = zipped(files(lanes="origin,destination,unit_cost\nNORTH,YRAD,0.2155555\n"))

    answer = client.post("/v1/runs", content=body, headers={"Content-Type": ZIP})

    assert answer.status_code == 422
    assert codes(answer.json()) == [
        ("lanes.csv!row 2,destination", "unknown_site"),
        ("lanes.csv!row 2,unit_cost", "too_many_decimals"),
    ]


class Parsing:
    """Counts how often this process, in any thread begun since, entered a reader of networks."""

    READERS = (intake, read_network, read_json, read_files, unpack)

    def __init__(self) -> None:
        """Begin at none."""
        self.count = 0
        self._codes = {reader.__code__ for reader in self.READERS}

    def __call__(self, frame: FrameType, event: str, _argument: object) -> None:
        """Count a call; the interpreter tells of each."""
        if event == "call" and frame.f_code in self._codes:
            self.count += 1

    def __enter__(self) -> Self:
        """Count from here on."""
        threading.setprofile(self)
        sys.setprofile(self)
        return self

    def __exit__(self, *_: object) -> None:
        """Count no more."""
        sys.setprofile(None)
        threading.setprofile(None)


def test_the_serving_process_parses_no_body(tmp_path: Path) -> None:
    """Not one of more than 256 KiB, in any form: a million rows would stop every other request.

    The children are other processes. That the counter counts is shown by a check in this one.
    """
    notes = {"extra": {"note": "x" * 2000}}
    items = [{"id": f"X-{number}", "unit": "bag", **notes} for number in range(200)]
    document = {**json.loads(json.dumps(EXAMPLE)), "items": [*EXAMPLE["items"], *items]}
    document["demand"][0]["priority"] = 2
    with zipfile.ZipFile(tmp_path / "stored.zip", "w") as archive:
        archive.writestr("network.json", json.dumps(document))
    bodies = {
        JSON: json.dumps(document).encode(),
        ZIP: (tmp_path / "stored.zip").read_bytes(),
        XLSX: with_noise(FORMS["workbook"][1](document)),
    }
    settings = Settings(data=tmp_path / "house")
    with (
        Parsing() as parsing,
        working_application(settings) as application,
        client_of(create_app(application, settings)) as client,
    ):
        for media_type, body in bodies.items():
            assert len(body) > 256 * 1024
            path = planned(client, body, **{"Content-Type": media_type})
            for what in ("plan", "network?form=received", "plan?table=order_lines"):
                assert client.get(f"{path}/{what}").status_code == 200
        assert parsing.count == 0
        take_in(bodies[JSON], tmp_path, media_type=JSON)
        assert parsing.count > 0


def with_noise(workbook: bytes) -> bytes:
    """Return a workbook with a part beside it that does not pack well, as pictures do not."""
    with zipfile.ZipFile(target := io.BytesIO(workbook), "a") as archive:
        archive.writestr("xl/media/image1.png", os.urandom(300 * 1024))
    return target.getvalue()


@pytest.mark.parametrize(
    ("body", "status", "code"),
    [
        (b"no zip", 400, "not_zip"),
        (zipped({"lanes.csv": b" " * (2 * BODY_MAX)}), 413, "body_too_large"),
        (zipped({"../lanes.csv": b""}), 400, "bad_entry_name"),
    ],
)
def test_hostile_files_are_refused(client: TestClient, body: bytes, status: int, code: str) -> None:
    """Each with its own status, and the service lives on."""
    answer = client.post("/v1/runs", content=body, headers={"Content-Type": ZIP})

    assert (answer.status_code, codes(answer.json())) == (status, [("", code)])
    assert client.get("/healthz").status_code == 200
