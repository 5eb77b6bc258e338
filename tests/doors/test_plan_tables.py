"""The tables of a plan as CSV: nothing lost, nothing moved."""

import csv
import io

import orjson

from service.doors.plan_tables import COLUMNS, table_csv


def test_a_row_comes_back_as_it_was() -> None:
    """Commas, quotes and line ends in an id must not shift a cell (RFC 4180)."""
    plan = {"site_use": [{"site": 'A,"B"\nC', "item": "I", "available": "1", "shipped": "2"}]}

    text = table_csv(plan, "site_use").decode()

    header, row = csv.reader(io.StringIO(text, newline=""))
    assert tuple(header) == COLUMNS["site_use"]
    assert row == ['A,"B"\nC', "I", "1", "2", "", ""]


def test_an_empty_table_still_has_its_header() -> None:
    """A program that reads columns by name must not fail on a good evening."""
    assert table_csv({"shortages": []}, "shortages").decode().strip() == ",".join(
        COLUMNS["shortages"]
    )


def test_what_holds_several_things_is_json_in_its_cell() -> None:
    """Sources of an order line stay one row, and stay readable by a program."""
    sources = [{"origin": "NORTH", "quantity": "880", "legs": [{"lane": "L1"}]}]
    plan = {"order_lines": [{"reference": "SO-1", "sources": sources}]}

    text = table_csv(plan, "order_lines").decode()

    (row,) = csv.DictReader(io.StringIO(text, newline=""))
    assert orjson.loads(row["sources"]) == sources


def test_a_formula_in_an_id_is_text_in_a_spreadsheet() -> None:
    """Whoever may write an order reference must not run commands at the planner's desk."""
    dangerous = ["=1+1", "+1+1", "-1+1", "@SUM(A1)", "\t=1", "\r=1", "\n=1", "＝1"]  # noqa: RUF001 - runs too
    plan = {"site_use": [{"site": text, "item": "SAFE=1", "left": "-1.05"} for text in dangerous]}

    text = table_csv(plan, "site_use").decode()

    rows = list(csv.DictReader(io.StringIO(text, newline="")))
    assert [row["site"] for row in rows] == [f"'{text}" for text in dangerous]
    assert {row["item"] for row in rows} == {"SAFE=1"}
    # A negative number is a number, and must stay one.
    assert {row["left"] for row in rows} == {"-1.05"}
