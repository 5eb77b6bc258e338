"""Plans as workbooks and Parquet: other programs read them, and not a digit is lost."""

import io
import tempfile
from collections.abc import Mapping
from decimal import Decimal
from fractions import Fraction
from pathlib import Path
from typing import Any

import openpyxl
import orjson
import pandas as pd
import polars as pl
import pyarrow.parquet as pq
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.doors import plan_workbook
from service.doors.plan_parquet import DECIMALS, write_parquet
from service.doors.plan_tables import AMOUNTS, COLUMNS, table_csv, table_rows
from service.doors.plan_workbook import write_workbook
from service.doors.template_workbook import write_template
from service.network.files.media_types import XLSX
from service.network.quantities import exact_text, parse_exact
from tests.files.reading import digest, read

EXAMPLE = Path(__file__).parents[2] / "openapi" / "examples" / "plan.json"
DANGEROUS = "=HYPERLINK(1)"


@pytest.fixture
def plan() -> dict[str, Any]:
    """Return a real plan."""
    document: dict[str, Any] = orjson.loads(EXAMPLE.read_bytes())
    return document


def workbook(plan: Mapping[str, Any], folder: Path) -> openpyxl.Workbook:
    """Return a plan as a workbook that another program opened."""
    path = folder / "plan.xlsx"
    write_workbook(plan, path)
    return openpyxl.load_workbook(path)


def cells_of(sheet: Any) -> list[dict[str, Any]]:  # noqa: ANN401 - the library has no types
    """Return the rows of a sheet by the names in its first row."""
    header, *rows = sheet.iter_rows(values_only=True)
    return [dict(zip(header, row, strict=True)) for row in rows]


def test_every_amount_of_a_workbook_comes_back(plan: dict[str, Any], tmp_path: Path) -> None:
    """As a number where a double holds it, as text where it does not: never another number."""
    odd = ["0.1", "-0.000000000001", "1234567890123456789.25", "1/3", "unknown", "880"]
    plan["consignments"] = [{"lane": f"L{n}", "weight_kg": text} for n, text in enumerate(odd)]

    found = cells_of(workbook(plan, tmp_path)["consignments"])

    assert [row["weight_kg"] for row in found] == [
        0.1,
        -1e-12,
        "1234567890123456789.25",
        "1/3",
        "unknown",
        880,
    ]


def test_every_table_of_a_plan_is_a_sheet(plan: dict[str, Any], tmp_path: Path) -> None:
    """With its header frozen, filters, and the same rows as the JSON."""
    book = workbook(plan, tmp_path)

    assert set(book.sheetnames) == {"summary", *COLUMNS}
    for table, columns in COLUMNS.items():
        sheet = book[table]
        assert sheet.freeze_panes == "A2"
        assert [cell.value for cell in sheet[1]] == list(columns)
        rows = table_rows(plan, table)
        assert len(cells_of(sheet)) == len(rows)
        for found, row in zip(cells_of(sheet), rows, strict=True):
            for column in AMOUNTS[table]:
                if row.get(column) is not None:
                    assert parse_exact(str(row[column])) == Fraction(str(found[column]))
    said = {row["field"]: row["value"] for row in cells_of(book["summary"])}
    assert said["network_digest"] == plan["network_digest"]
    assert said["total_cost"] == plan["total_cost"]


def test_texts_of_a_workbook_are_never_formulas(plan: dict[str, Any], tmp_path: Path) -> None:
    """Nor become one when somebody edits the cell: the mark of a quoted text is on it."""
    plan["site_use"] = [{"site": DANGEROUS, "item": "00123", "available": "1"}]

    cell = workbook(plan, tmp_path)["site_use"]["A2"]

    assert (cell.value, cell.data_type, cell.quotePrefix) == (DANGEROUS, "s", True)
    zeros = workbook(plan, tmp_path)["site_use"]["B2"]
    assert (zeros.value, zeros.data_type) == ("00123", "s")


def test_a_text_too_long_for_a_cell_says_so(plan: dict[str, Any], tmp_path: Path) -> None:
    """The library would leave the cell out, and a reader would take that for nothing."""
    references = [f"SO-{number:06}" for number in range(4000)]
    plan["consignments"] = [{"lane": "L1", "order_references": references}]

    (row,) = cells_of(workbook(plan, tmp_path)["consignments"])

    assert "too long for a cell" in row["order_references"]


def test_a_table_too_long_for_a_sheet_goes_on(
    plan: dict[str, Any], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A sheet has a last row, a plan has none."""
    monkeypatch.setattr(plan_workbook, "ROWS_MAX", 4)
    plan["site_use"] = [{"site": f"S{number}", "item": "I"} for number in range(7)]

    book = workbook(plan, tmp_path)

    names = ["site_use", "site_use (2)", "site_use (3)"]
    found = [row["site"] for name in names for row in cells_of(book[name])]
    assert found == [f"S{number}" for number in range(7)]


def test_a_network_without_a_plan_is_a_workbook_too(plan: dict[str, Any], tmp_path: Path) -> None:
    """Its summary says why there is none."""
    empty: dict[str, Any] = {name: [] for name in COLUMNS if name != "totals"}
    nothing = (
        plan
        | empty
        | {
            "status": "no_plan",
            "total_cost": None,
            "cost_parts": None,
            "reason": {"detail": "More is forced than can come in.", "items": []},
        }
    )

    said = {row["field"]: row["value"] for row in cells_of(workbook(nothing, tmp_path)["summary"])}

    assert said["reason"] == "More is forced than can come in."
    assert said["total_cost"] is None


@pytest.mark.parametrize("table", COLUMNS)
def test_other_programs_read_our_tables(plan: dict[str, Any], table: str, tmp_path: Path) -> None:
    """Both pandas and polars see the same amounts, exactly, and the same texts."""
    path = tmp_path / "table.parquet"
    write_parquet(plan, table, path)

    rows = table_rows(plan, table)
    frames = {"pandas": pd.read_parquet(path), "polars": pl.read_parquet(path).to_pandas()}
    for frame in frames.values():
        assert list(frame.columns) == list(COLUMNS[table])
        for column in AMOUNTS[table]:
            found = [None if pd.isna(cell) else Fraction(cell) for cell in frame[column]]
            assert found == [
                None if row.get(column) is None else Fraction(row[column]) for row in rows
            ]
    csv = pd.read_csv(io.BytesIO(table_csv(plan, table)), dtype=str, keep_default_na=False)
    assert list(csv.columns) == list(COLUMNS[table])
    assert len(csv) == len(rows)


def test_amounts_that_are_no_decimals_make_a_column_of_text(
    plan: dict[str, Any], tmp_path: Path
) -> None:
    """A third of a pallet has no decimal; it is told as it is, and its column with it."""
    plan["consignments"] = [
        {"lane": "L1", "pallets": "1/3", "weight_kg": "1.5", "cost": "0.0000000000001"},
        {"lane": "L2", "pallets": "2", "weight_kg": None, "cost": "1"},
    ]
    path = tmp_path / "consignments.parquet"
    write_parquet(plan, "consignments", path)

    table = pq.read_table(path)

    assert table.column("pallets").to_pylist() == ["1/3", "2"]
    assert table.column("cost").to_pylist() == ["0.0000000000001", "1"]
    assert table.column("weight_kg").to_pylist() == [Decimal("1.5"), None]
    said = {key.decode(): value.decode() for key, value in table.schema.metadata.items()}
    assert said["network_digest"] == plan["network_digest"]


@given(
    texts=st.lists(
        st.fractions().map(exact_text)
        | st.decimals(-(10**26), 10**26, places=DECIMALS, allow_nan=False).map(
            lambda number: exact_text(Fraction(number))
        ),
        max_size=5,
    )
)
def test_whatever_amount_comes_back_from_parquet(texts: list[str]) -> None:
    """Every exact number that a plan can hold, to its last decimal."""
    plan = {"site_use": [{"available": text} for text in texts]}
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "site_use.parquet"
        write_parquet(plan, "site_use", path)
        found = pq.read_table(path).column("available").to_pylist()

    assert [parse_exact(cell) if isinstance(cell, str) else Fraction(cell) for cell in found] == [
        parse_exact(text) for text in texts
    ]


def test_totals_count_what_is_there(plan: dict[str, Any]) -> None:
    """Rows and exact sums, so that a receiver can see that nothing was lost on the way."""
    plan["site_use"] = [
        {"site": "A", "available": "0.1", "shipped": "1/3"},
        {"site": "B", "available": "0.2", "shipped": "2/3", "left": None},
    ]

    totals = {
        (row["table"], row["column"]): (row["rows"], row["total"])
        for row in table_rows(plan, "totals")
    }

    assert totals["site_use", "available"] == (2, "0.3")
    assert totals["site_use", "shipped"] == (2, "1")
    assert totals["site_use", "left"] == (2, "0")
    assert totals["plan_lines", "cost"] == (
        len(plan["plan_lines"]),
        exact_text(sum((Fraction(row["cost"]) for row in plan["plan_lines"]), Fraction(0))),
    )


def test_the_same_plan_is_the_same_bytes(plan: dict[str, Any], tmp_path: Path) -> None:
    """Its entity tag over HTTP says so, whoever writes it and when."""
    written = []
    for name in ("one", "other"):
        folder = tmp_path / name
        folder.mkdir()
        write_workbook(plan, folder / "plan.xlsx")
        write_parquet(plan, "plan_lines", folder / "plan.parquet")
        written.append([path.read_bytes() for path in sorted(folder.iterdir())])

    assert written[0] == written[1]


def test_the_template_is_a_network(tmp_path: Path) -> None:
    """It can be sent as it stands, and its notes explain every column that it has."""
    path = tmp_path / "network.xlsx"
    write_template(path)

    book = openpyxl.load_workbook(path)
    explained = {(row[0].value, row[1].value) for row in book["notes"].iter_rows()}
    for sheet in book.worksheets[1:]:
        for cell in sheet[1]:
            column = str(cell.value)
            family = f"{column.partition('.')[0]}. ..."
            known = {(sheet.title, column), (sheet.title, family)} & explained
            assert known or sheet.title == "network"
    assert book["items"]["A2"].value == "0025"
    assert book["items"].column_dimensions["A"].width > 0
    assert digest(read(path.read_bytes(), XLSX))
