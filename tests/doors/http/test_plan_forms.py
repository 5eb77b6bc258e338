"""The forms in which a plan is handed out: CSV, Parquet, workbooks, made where it stops nobody."""

import csv
import io
from decimal import Decimal
from pathlib import Path

import openpyxl
import orjson
import pyarrow.parquet as pq
import pytest
from fastapi.testclient import TestClient

from service.doors.http import tables
from service.network.files.media_types import PARQUET, XLSX
from service.network.files.table_columns import TABLES
from tests.doors.http.fakes import (
    PLAN,
    RUN_ID,
    FakeHouse,
    client_of,
    codes,
    digest,
    fake_app,
)
from tests.files.writing import zipped

HERE = f"/v1/runs/{RUN_ID}"


@pytest.fixture
def house() -> FakeHouse:
    """Return use cases to be told what to answer."""
    return FakeHouse()


@pytest.fixture
def client(house: FakeHouse, tmp_path: Path) -> TestClient:
    """Return a client of the door over ``house``."""
    return client_of(fake_app(house, tmp_path))


def test_table_of_a_plan_is_csv(client: TestClient) -> None:
    """A planner opens it in a spreadsheet, where an id must not run as a formula."""
    answer = client.get(f"{HERE}/plan?table=plan_lines", headers={"Accept": "text/csv"})

    assert answer.headers["Content-Type"] == "text/csv; charset=utf-8; header=present"
    disposition = answer.headers["Content-Disposition"]
    assert disposition == 'attachment; filename="2026-02-03-1-plan_lines.csv"'
    (row,) = csv.DictReader(io.StringIO(answer.text, newline=""))
    assert (row["lane"], row["quantity"]) == ("'=L1", "880")


def test_plan_is_a_workbook_too(client: TestClient, tmp_path: Path) -> None:
    """It is made by another process, has a sheet for each table, and the same bytes each time."""
    answers = [client.get(f"{HERE}/plan", headers={"Accept": XLSX}) for _ in range(2)]

    assert answers[0].headers["Content-Type"] == XLSX
    disposition = answers[0].headers["Content-Disposition"]
    assert disposition == 'attachment; filename="2026-02-03-1-plan.xlsx"'
    assert answers[0].headers["ETag"] == f'"{digest(orjson.dumps(PLAN))};plan.xlsx"'
    assert answers[0].content == answers[1].content
    workbook = openpyxl.load_workbook(io.BytesIO(answers[0].content))
    assert workbook["plan_lines"]["A2"].value == "=L1"
    assert workbook["plan_lines"]["A2"].data_type == "s"
    assert list((tmp_path / "spool").iterdir()) == []


def test_table_of_a_plan_is_parquet_too(client: TestClient) -> None:
    """Amounts keep every digit: they are decimals there, not binary fractions."""
    answer = client.get(f"{HERE}/plan?table=plan_lines", headers={"Accept": PARQUET})

    assert answer.headers["Content-Type"] == PARQUET
    table = pq.read_table(io.BytesIO(answer.content))
    assert table.column("lane").to_pylist() == ["=L1"]
    assert table.column("quantity").to_pylist() == [Decimal(880)]


def test_what_was_received_is_answered_in_its_own_form(
    client: TestClient, house: FakeHouse
) -> None:
    """A zip that was sent is no JSON when it is asked for."""
    house.received = zipped({"lanes.csv": b"origin"})

    whole = client.get(f"{HERE}/network?form=received")
    other = client.get(f"{HERE}/network?form=received", headers={"Accept": "application/json"})

    assert whole.headers["Content-Type"] == "application/zip"
    assert whole.content == house.received
    assert other.status_code == 406


def test_template_is_answered(client: TestClient, tmp_path: Path) -> None:
    """Nobody has to guess what columns are called."""
    answer = client.get("/v1/template.xlsx")

    assert answer.headers["Content-Type"] == XLSX
    workbook = openpyxl.load_workbook(io.BytesIO(answer.content))
    assert workbook.sheetnames == ["notes", *TABLES]
    assert list((tmp_path / "spool").iterdir()) == []


def test_table_of_a_large_plan_is_made_in_another_process(
    client: TestClient, house: FakeHouse, tmp_path: Path
) -> None:
    """It is the same table, and neither it nor its plan stays on disk."""
    lines = [{"lane": f"L{number}", "quantity": "1"} for number in range(20_000)]
    house.plan = orjson.dumps({**PLAN, "plan_lines": lines})
    assert len(house.plan) > tables.THREAD_BYTES_MAX

    answer = client.get(f"{HERE}/plan?table=plan_lines")

    rows = list(csv.DictReader(io.StringIO(answer.text, newline="")))
    assert [row["lane"] for row in rows] == [line["lane"] for line in lines]
    assert list((tmp_path / "spool").iterdir()) == []


def test_table_that_cannot_be_made_is_our_mistake(
    client: TestClient, house: FakeHouse, tmp_path: Path
) -> None:
    """The process that makes it dies; the service answers and cleans up."""
    house.plan = b"[" * (tables.THREAD_BYTES_MAX + 1)

    answer = client.get(f"{HERE}/plan?table=plan_lines")

    assert answer.status_code == 500
    assert answer.json()["type"] == "/problems/internal"
    assert list((tmp_path / "spool").iterdir()) == []


def test_table_that_takes_too_long_is_given_up(
    client: TestClient, house: FakeHouse, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A process that is started takes longer than no time at all."""
    monkeypatch.setattr(tables, "SECONDS_MAX", 0.0)
    house.plan = orjson.dumps({**PLAN, "spare": " " * tables.THREAD_BYTES_MAX})

    answer = client.get(f"{HERE}/plan?table=plan_lines")

    assert (answer.status_code, answer.json()["type"]) == (503, "/problems/busy")


@pytest.mark.parametrize("accept", ["text/csv", PARQUET])
def test_form_of_one_table_needs_its_name(client: TestClient, accept: str) -> None:
    """A plan has several tables; the service does not choose one."""
    answer = client.get(f"{HERE}/plan", headers={"Accept": accept})

    assert answer.status_code == 422
    assert codes(answer.json()) == [("?table", "missing_parameter")]
