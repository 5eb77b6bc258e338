"""Workbooks as people make them: exact numbers, ids that stay text, cells that are no values."""

import datetime as dt
import io
from collections.abc import Mapping, Sequence
from typing import Any

import openpyxl
import pytest
import xlsxwriter

from service.doors.plan_workbook import is_exact_double
from service.network.files.media_types import XLSX
from tests.files.reading import TABLES, cautions, digest, files, places, read

PLAIN = digest(read(files()))
# Cells have no zone.
MOMENT = dt.datetime(2026, 2, 3, 16)  # noqa: DTZ001 - see above
ROWS: Mapping[str, Sequence[Sequence[Any]]] = {
    name: [line.split(",") for line in text.splitlines()] for name, text in TABLES.items()
}


def workbook(**changed: Sequence[Sequence[Any]]) -> bytes:
    """Return the network as a workbook; numbers are numbers, some sheets ``changed``."""
    target = io.BytesIO()
    with xlsxwriter.Workbook(target, {"in_memory": True}) as book:
        moment = book.add_format({"num_format": "yyyy-mm-dd hh:mm"})
        date = book.add_format({"num_format": "yyyy-mm-dd"})
        for name, rows in {**ROWS, **changed}.items():
            sheet = book.add_worksheet(name)
            for number, row in enumerate(rows):
                for place, cell in enumerate(row):
                    match cell:
                        case None:
                            pass
                        case bool():
                            sheet.write_boolean(number, place, cell)
                        case int() | float():
                            sheet.write_number(number, place, cell)
                        case dt.datetime():
                            sheet.write_datetime(number, place, cell, moment)
                        case dt.date():
                            sheet.write_datetime(number, place, cell, date)
                        case _:
                            sheet.write_string(number, place, cell)
    return target.getvalue()


def lanes(unit_cost: object) -> list[list[Any]]:
    """Return the sheet of lanes with another cost."""
    return [["origin", "destination", "unit_cost"], ["NORTH", "YARD", unit_cost]]


def supply(name: str, cell: object) -> list[list[Any]]:
    """Return the sheet of supply with one more column."""
    return [["site", "item", "quantity", name], ["NORTH", "0025", 900, cell]]


def test_numbers_and_texts_are_the_same_network() -> None:
    """A cell with the number 0.215 means what the text 0.215 means."""
    typed = workbook(
        network=[
            ["field", "value"],
            ["format", 1],
            ["currency", "EUR"],
            ["cut_off", ROWS["network"][1][2]],
        ],
        lanes=lanes(0.215),
        demand=[ROWS["demand"][0], ["SO-1", "YARD", "0025", 880.5]],
        supply=[ROWS["supply"][0], ["NORTH", "0025", 900]],
    )

    report = read(typed, XLSX)

    assert digest(report) == PLAIN
    assert cautions(report) == {}


@pytest.mark.parametrize(
    ("number", "text"),
    [
        (0.000001, "0.000001"),
        (123456789.123456, "123456789.123456"),
        (1e15, "1000000000000000"),
        (1e18, "1000000000000000000"),
        (-0.0, "0"),
        (2.0**53 - 1, None),
        (1 / 3, None),
    ],
)
def test_a_number_is_accepted_where_its_decimal_is_certain(number: float, text: str | None) -> None:
    """A double of at most 15 digits comes from one decimal alone; of more, nobody can tell."""
    report = read(workbook(lanes=lanes(number)), XLSX)

    if text is None:
        shown = format(number, ".17g").removesuffix(".0")
        ((place, code, value),) = places(report)
        assert (place, code) == ("lanes!row 2,unit_cost", "number_not_exact")
        assert value is not None
        assert float(value) == float(shown)
    else:
        plain = TABLES["lanes"].replace("0.215", text)
        assert digest(report) == digest(read(files(lanes=plain)))


def test_a_number_with_too_many_decimals_is_refused_like_any_other() -> None:
    """Its 15 digits are certain, but the network keeps six decimals."""
    report = read(workbook(lanes=lanes(0.1234567)), XLSX)

    assert places(report) == [("lanes!row 2,unit_cost", "too_many_decimals", "0.1234567")]


def test_whole_numbers_where_ids_belong_are_doubted() -> None:
    """They are read as their digits, and the plan says where, for zeros in front are gone."""
    book = workbook(
        items=[["id", "unit", "step"], [25, "bag", 0.1]],
        supply=[["site", "item", "quantity"], ["NORTH", 25, 900]],
        demand=[["reference", "site", "item", "quantity"], [10077, "YARD", 25, 880.5]],
    )

    report = read(book, XLSX)

    text = {
        name: table.replace("0025", "25").replace("SO-1", "10077") for name, table in TABLES.items()
    }
    assert digest(report) == digest(read(files(**text)))
    assert cautions(report)["number_read_as_text"] == [
        ("items!row 2,id", "25"),
        ("supply!row 2,item", "25"),
        ("demand!row 2,reference", "10077"),
    ]


def test_a_number_beside_ids_with_zeros_in_front_has_lost_its_own() -> None:
    """One cell was typed as text, the next was not: 26 was 0026 once, or was not."""
    book = workbook(items=[["id", "unit", "step"], ["0025", "bag", 0.1], [26, "bag", 1]])

    report = read(book, XLSX)

    assert places(report) == [("items!row 3,id", "number_for_text", "26")]
    assert "zeros in front" in report.faults[0].detail


@pytest.mark.parametrize(
    ("name", "cell", "told"),
    [
        ("lot", 1.5, ("number_for_text", "1.5")),
        ("lot", dt.date(2026, 2, 3), ("date_for_other", "2026-02-03")),
        ("unit_cost", dt.date(2026, 2, 3), ("date_for_other", "2026-02-03")),
        ("unit_cost", True, ("boolean_cell", "TRUE")),
        ("lot", False, ("boolean_cell", "FALSE")),
        ("as_of", MOMENT, ("bad_time", "2026-02-03T16:00:00")),
        ("as_of", 46056, ("number_for_text", "46056")),
        ("best_before", MOMENT, ("date_for_other", "2026-02-03T16:00:00")),
        ("best_before", "3.2.2026", ("bad_date", "3.2.2026")),
        ("keep.quantity", "ten", ("not_a_number", "ten")),
        ("keep.priority", 2.5, ("bad_number", "2.5")),
        ("keep.priority", True, ("boolean_cell", "TRUE")),
        ("extra.route", 7.5, ("number_for_text", "7.5")),
        ("extra", "[1]", ("bad_extra", "[1]")),
        ("extra", '{"a": 1}', ("bad_extra", "an object")),
    ],
)
def test_a_cell_of_another_kind_is_a_fault(name: str, cell: object, told: tuple[str, str]) -> None:
    """With its sheet, row and column, and with what stands in it."""
    rows = supply(name, cell)
    if name == "keep.priority":
        rows = [[*rows[0], "keep.quantity"], [*rows[1], 1]]

    report = read(workbook(supply=rows), XLSX)

    assert places(report) == [(f"supply!row 2,{name}", *told)]


@pytest.mark.parametrize("cell", [dt.date(2026, 12, 31), dt.datetime(2026, 12, 31), "2026-12-31"])  # noqa: DTZ001 - cells have no zone
def test_dates_may_be_dates(cell: object) -> None:
    """A column of dates is the one place where a date cell is what was meant."""
    expected = read(files(supply="site,item,quantity,best_before\nNORTH,0025,900,2026-12-31\n"))

    assert digest(read(workbook(supply=supply("best_before", cell)), XLSX)) == digest(expected)


def test_errors_and_formulas_without_a_value_are_faults() -> None:
    """Readers take both for empty cells, and a capacity that vanishes is no limit at all."""
    book = openpyxl.Workbook()
    for name, rows in ROWS.items():
        sheet = book.create_sheet(name)
        for row in rows:
            sheet.append(row)
    book["lanes"]["D1"], book["lanes"]["D2"] = "capacity", "=1/0"
    book["supply"]["D1"], book["supply"]["D2"] = "unit_cost", "#N/A"
    book["supply"]["D2"].data_type = "e"
    book["demand"]["E1"], book["demand"]["E5"] = "order", "=A2"
    target = io.BytesIO()
    book.save(target)

    report = read(target.getvalue(), XLSX)

    assert [told for told in places(report) if told[1] != "missing_field"] == [
        ("supply!row 2,unit_cost", "error_cell", "#N/A"),
        ("demand!row 5,order", "formula_without_value", None),
        ("lanes!row 2,capacity", "formula_without_value", None),
    ]


def test_formulas_with_a_value_count_as_their_value() -> None:
    """What the spreadsheet program showed is what was meant."""
    target = io.BytesIO()
    with xlsxwriter.Workbook(target, {"in_memory": True}) as book:
        for name, rows in ROWS.items():
            sheet = book.add_worksheet(name)
            for number, row in enumerate(rows):
                sheet.write_row(number, 0, row, book.add_format({"num_format": "@"}))
            if name == "lanes":
                sheet.write_formula(1, 2, "=0.2+0.015", None, 0.215)

    assert digest(read(target.getvalue(), XLSX)) == PLAIN


def test_sheets_and_rows_that_hold_nothing_are_passed_over() -> None:
    """Empty rows, an empty sheet, notes, and formatting far away."""
    book = openpyxl.load_workbook(io.BytesIO(workbook()))
    book.create_sheet("Sheet1")
    book.create_sheet("notes")["A1"] = "for people"
    book["lanes"].insert_rows(2, 3)
    book["lanes"]["XFD90000"].number_format = "@"
    target = io.BytesIO()
    book.save(target)

    assert digest(read(target.getvalue(), XLSX)) == PLAIN


def test_sheets_are_found_by_name_whatever_their_case() -> None:
    """Programs write names of sheets with capitals."""
    rows = {name.capitalize(): sheet for name, sheet in ROWS.items()}
    target = io.BytesIO()
    with xlsxwriter.Workbook(target, {"in_memory": True}) as book:
        for name, sheet in rows.items():
            here = book.add_worksheet(name)
            for number, row in enumerate(sheet):
                for place, cell in enumerate(row):
                    here.write_string(number, place, cell)

    assert digest(read(target.getvalue(), XLSX)) == PLAIN


def test_a_sheet_too_many_is_a_fault() -> None:
    """Nothing that was sent is ever ignored."""
    report = read(workbook(colours=[["id"], ["T1"]]), XLSX)

    assert places(report) == [("colours", "unknown_sheet", None)]


def test_one_number_is_exact_and_its_neighbour_is_not() -> None:
    """The rule by itself: at most 15 digits, as they come back from the double."""
    exact = ["0", "-1.05", "123456789012345", "0.000000000012345", "1000000000000000000000"]
    inexact = ["1234567890123456", "0.1234567890123456", "1/3", "unknown", "1e5", ""]

    assert all(is_exact_double(text) for text in exact)
    assert not any(is_exact_double(text) for text in inexact)
