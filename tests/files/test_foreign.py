"""Files that other programs wrote, committed as they came, mean the network they were written from.

With ``--long`` the programs that are installed here write them again; a program that is missing
fails its test with what to install.
"""

import csv
import io
import json
import zipfile
from pathlib import Path
from typing import Any

import orjson
import pandas as pd
import pytest

from service.doors.plan_tables import COLUMNS
from service.doors.plan_workbook import write_workbook
from service.doors.template_workbook import write_template
from service.network.files.media_types import JSON, XLSX, ZIP
from tests.files.foreign import DATA, FOREIGN, frames, resaved, sheets_as_csv
from tests.files.reading import cautions, digest, places, read
from tests.files.writing import zipped

# The tables of foreign.py, written out by hand.
DEFINITION: dict[str, Any] = {
    "format": 1,
    "name": "Évening cut-off, kväll",
    "currency": "EUR",
    "cut_off": "2026-02-03T16:00:00+01:00",
    "items": [
        {
            "id": "0025",
            "unit": "bag",
            "step": 1,
            "weight_kg": "25.2",
            "packs": [{"unit": "pallet", "contains": 40}],
        },
        {"id": "BRINE", "unit": "l", "step": "0.5", "weight_kg": "1.2"},
    ],
    "sites": [
        {
            "id": "NORTH",
            "roles": ["warehouse", "cross_dock"],
            "latitude": "61.234567",
            "handling_cost": "0.04",
        },
        {"id": "HUB", "roles": ["cross_dock"], "handling_cost": {"BRINE": "0.1"}},
        {"id": "YARD-07", "roles": ["ship_to"], "latitude": "60.9"},
        {"id": "YARD-12", "roles": ["ship_to"], "latitude": "-0.000001"},
    ],
    "supply": [
        {
            "site": "NORTH",
            "item": "0025",
            "quantity": 3200,
            "best_before": "2026-12-31",
            "keep": {"quantity": 10, "priority": 3},
        },
        {"site": "NORTH", "item": "BRINE", "quantity": "500.5"},
    ],
    "demand": [
        {
            "reference": "SO-10077/1",
            "site": "YARD-07",
            "item": "0025",
            "quantity": 880,
            "priority": 2,
            "extra": {"route": "R7"},
        },
        {
            "reference": "SO-10077/2",
            "site": "YARD-12",
            "item": "BRINE",
            "quantity": "200.5",
            "origins": ["NORTH"],
            "extra": {"route": "+1 =1"},
        },
        {"reference": "00123", "site": "YARD-12", "item": "0025", "quantity": 1, "priority": 9},
    ],
    "lanes": [
        {
            "origin": "NORTH",
            "destination": "YARD-07",
            "item": "0025",
            "unit_cost": "0.215",
            "capacity": 700,
        },
        {"origin": "NORTH", "destination": "HUB", "unit_cost": "0.11"},
        {
            "origin": "HUB",
            "destination": "YARD-07",
            "item": "0025",
            "unit_cost": "-0.000001",
            "carrier": "Värmö Frakt",
        },
        {
            "origin": "HUB",
            "destination": "YARD-12",
            "item": "BRINE",
            "unit_cost": "0.16",
            "capacity": "12345678901.125",
            "carrier": "C-ROAD",
        },
    ],
}
EXAMPLE = Path(__file__).parents[2] / "openapi" / "examples" / "plan.json"
EXPECTED = read(json.dumps(DEFINITION).encode(), JSON)


def assert_same(body: bytes, form: str) -> None:
    """Assert that a body means the definition above, and is doubted no more than it is."""
    report = read(body, XLSX if form == "xlsx" else ZIP)

    assert digest(report) == digest(EXPECTED)
    assert set(cautions(report)) == set(cautions(EXPECTED))


@pytest.mark.parametrize("name", FOREIGN)
def test_files_of_other_programs_are_read(name: str) -> None:
    """As they were committed: what a program wrote does not change with the next release."""
    assert_same((DATA / name).read_bytes(), FOREIGN[name][0])


@pytest.mark.long
@pytest.mark.parametrize("name", FOREIGN)
def test_programs_that_are_installed_are_read(name: str) -> None:
    """What they write today."""
    form, write = FOREIGN[name]

    assert_same(write(), form)


@pytest.mark.long
def test_the_template_survives_a_spreadsheet_program(tmp_path: Path) -> None:
    """Opened and saved by LibreOffice, it is the same network: zeros in front are still there."""
    path = tmp_path / "network.xlsx"
    write_template(path)

    saved = read(resaved(path.read_bytes()), XLSX)

    assert digest(saved) == digest(read(path.read_bytes(), XLSX))
    assert cautions(saved) == {}


@pytest.mark.long
def test_a_spreadsheet_program_reads_our_plan(tmp_path: Path) -> None:
    """Every amount and text of a plan as LibreOffice sees it, what looks like a formula too."""
    plan = orjson.loads(EXAMPLE.read_bytes())
    plan["plan_lines"][0] |= {"lane": "=1+1", "quantity": "1234567890123456789.25", "cost": "1/3"}
    path = tmp_path / "plan.xlsx"
    write_workbook(plan, path)

    sheets = sheets_as_csv(path.read_bytes())

    assert set(sheets) == {"summary", *COLUMNS}
    lines = csv.DictReader(io.StringIO(sheets["plan_lines"].decode(), newline=""), delimiter=";")
    assert [{name: row[name] for name in COLUMNS["plan_lines"]} for row in lines] == plan[
        "plan_lines"
    ]


def test_every_committed_file_is_read() -> None:
    """A file that no test reads proves nothing."""
    assert {path.name for path in DATA.iterdir()} == set(FOREIGN)


def test_floats_of_pandas_are_refused_with_what_to_do() -> None:
    """The commonest mistake: a price that pandas holds as a binary float."""
    target = io.BytesIO()
    lanes = frames()["lanes"].assign(unit_cost=lambda frame: frame["unit_cost"].astype(float))
    lanes.to_parquet(target, index=False)

    report = read(replaced("pandas-parquet.zip", {"lanes.parquet": target.getvalue()}))

    assert places(report) == [("lanes.parquet!column unit_cost", "float_column", "double")]
    assert "decimal128" in report.faults[0].detail


def test_ids_that_pandas_took_for_numbers_are_refused() -> None:
    """0025 read as a number by pandas is 25 when it is written again."""
    text = frames()["items"].to_csv(index=False)
    target = io.BytesIO()
    pd.read_csv(io.StringIO(text.replace("BRINE", "0026"))).to_parquet(target, index=False)

    report = read(replaced("pandas-parquet.zip", {"items.parquet": target.getvalue()}))

    assert ("items.parquet!column id", "wrong_column_type", "int64") in places(report)


def replaced(name: str, changed: dict[str, bytes]) -> bytes:
    """Return a committed zip with some of its files changed."""
    with zipfile.ZipFile(DATA / name) as archive:
        return zipped({entry: archive.read(entry) for entry in archive.namelist()} | changed)
