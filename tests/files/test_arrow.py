"""Parquet and Arrow files as databases and programs write them: exact types in, floats refused."""

import datetime as dt
from collections.abc import Callable, Sequence
from decimal import Decimal
from typing import Any

import numpy as np
import pyarrow as pa
import pytest

from service.network.exact_numbers import ExactNumbers
from service.network.files.arrow_numbers import exact_numbers
from service.network.files.arrow_texts import list_cells, text_cells
from tests.files.reading import cautions, digest, files, places, read
from tests.files.writing import arrow_bytes, parquet_bytes

PLAIN = digest(read(files()))
WRITERS: Sequence[tuple[str, Callable[[pa.Table], bytes]]] = (
    ("parquet", parquet_bytes),
    ("arrow", arrow_bytes),
)
UTC = dt.UTC


def with_table(
    name: str, columns: dict[str, Any], ending: str, write: Callable[[pa.Table], bytes]
) -> dict[str, bytes]:
    """Return the network with one of its tables as Parquet or Arrow."""
    return files(**{name: None}) | {f"{name}.{ending}": write(pa.table(columns))}


def lanes(unit_cost: pa.Array) -> dict[str, Any]:
    """Return one lane with a cost."""
    return {"origin": ["NORTH"], "destination": ["YARD"], "unit_cost": unit_cost}


@pytest.mark.parametrize(("ending", "write"), WRITERS)
@pytest.mark.parametrize(
    ("cost", "text"),
    [
        (pa.array([Decimal("0.215")], pa.decimal128(38, 18)), "0.215"),
        (pa.array([Decimal("0.215")], pa.decimal64(10, 3)), "0.215"),
        (pa.array([Decimal("-1.5")], pa.decimal128(5, 1)), "-1.5"),
        (pa.array([Decimal("12345678901234.000000")], pa.decimal128(38, 18)), "12345678901234"),
        (pa.array([Decimal(4611686018427387903)], pa.decimal128(19, 0)), "4611686018427387903"),
        (pa.array([7], pa.uint8()), "7"),
        (pa.array([2**62 - 1], pa.uint64()), "4611686018427387903"),
        (pa.array([-3], pa.int64()), "-3"),
        (pa.array(["0.215"], pa.string()), "0.215"),
        (pa.array(["0.215"], pa.large_string()), "0.215"),
        (pa.array(["0.215"], pa.string_view()), "0.215"),
        (pa.array(["0.215"]).dictionary_encode(), "0.215"),
    ],
    ids=lambda value: str(value.type) if isinstance(value, pa.Array) else None,
)
def test_exact_types_are_read_exactly(
    ending: str, write: Callable[[pa.Table], bytes], cost: pa.Array, text: str
) -> None:
    """Every type that holds decimals without rounding means what its digits say."""
    expected = read(files(lanes=f"origin,destination,unit_cost\nNORTH,YARD,{text}\n"))

    assert digest(read(with_table("lanes", lanes(cost), ending, write))) == digest(expected)


@pytest.mark.parametrize(("ending", "write"), WRITERS)
@pytest.mark.parametrize(
    ("cost", "code", "value"),
    [
        (
            pa.array([Decimal("0.1234567")], pa.decimal128(38, 18)),
            "too_many_decimals",
            "0.1234567",
        ),
        (pa.array([Decimal("0.1234567")], pa.decimal128(8, 7)), "too_many_decimals", "0.1234567"),
        (
            pa.array([Decimal(2**62)], pa.decimal128(19, 0)),
            "number_too_large",
            "4611686018427387904",
        ),
        (pa.array([Decimal(10**30)], pa.decimal128(38, 0)), "number_too_large", str(10**30)),
        (pa.array([-(2**63)], pa.int64()), "number_too_large", str(-(2**63))),
        (pa.array([2**64 - 1], pa.uint64()), "number_too_large", str(2**64 - 1)),
        (pa.array(["1e3"]), "not_a_number", "1e3"),
        (pa.array([None], pa.decimal128(9, 2)), "missing_field", None),
    ],
    ids=str,
)
def test_numbers_that_do_not_fit_are_faults(
    ending: str, write: Callable[[pa.Table], bytes], cost: pa.Array, code: str, value: str | None
) -> None:
    """With file, row and column, and every digit."""
    report = read(with_table("lanes", lanes(cost), ending, write))

    assert places(report) == [(f"lanes.{ending}!row 1,unit_cost", code, value)]


@pytest.mark.parametrize(
    ("table", "name", "column", "code", "detail"),
    [
        ("lanes", "unit_cost", pa.array([0.5]), "float_column", "decimal128"),
        ("lanes", "unit_cost", pa.array([0.5], pa.float32()), "float_column", "decimal128"),
        (
            "lanes",
            "unit_cost",
            pa.array([Decimal(1)], pa.decimal256(40, 0)),
            "wrong_column_type",
            "decimal128",
        ),
        ("lanes", "unit_cost", pa.array([True]), "wrong_column_type", "numbers; its type is bool"),
        ("lanes", "id", pa.array([7]), "wrong_column_type", "zeros in front"),
        ("lanes", "id", pa.array([b"L1"], pa.binary()), "wrong_column_type", "strings"),
        (
            "lanes",
            "tags",
            pa.array([[1]], pa.list_(pa.field("element", pa.int64()))),
            "wrong_column_type",
            "lists of strings",
        ),
        ("demand", "priority", pa.array([2.0]), "wrong_column_type", "whole numbers"),
        (
            "demand",
            "ordered_at",
            pa.array([0], pa.timestamp("ms")),
            "wrong_column_type",
            "time zone",
        ),
        (
            "supply",
            "best_before",
            pa.array([0], pa.timestamp("ms", "UTC")),
            "wrong_column_type",
            "date32",
        ),
        ("supply", "extra", pa.array([{"a": "b"}]), "wrong_column_type", "JSON objects as text"),
    ],
    ids=str,
)
def test_a_column_of_the_wrong_type_is_one_fault(
    table: str, name: str, column: pa.Array, code: str, detail: str
) -> None:
    """A million rows have one mistake, and the advice names the types that keep every digit."""
    rows: dict[str, dict[str, Any]] = {
        "lanes": lanes(pa.array(["0.215"])),
        "demand": {
            "reference": ["SO-1"],
            "site": ["YARD"],
            "item": ["0025"],
            "quantity": ["880.5"],
        },
        "supply": {"site": ["NORTH"], "item": ["0025"], "quantity": [900]},
    }

    report = read(with_table(table, rows[table] | {name: column}, "parquet", parquet_bytes))

    assert places(report) == [(f"{table}.parquet!column {name}", code, str(column.type))]
    assert detail in report.faults[0].detail


def test_times_dates_lists_and_whole_numbers_have_types_too() -> None:
    """The same network as the same texts."""
    moment = dt.datetime(2026, 2, 3, 15, 52, 0, 123456, tzinfo=UTC)
    supply = {
        "site": ["NORTH", "NORTH"],
        "item": ["0025", "0025"],
        "quantity": [900, 1],
        "as_of": pa.array([moment, None], pa.timestamp("ns", "Europe/Oslo")),
        "best_before": pa.array([dt.date(2026, 12, 31), None], pa.date32()),
        "keep.quantity": pa.array([10, None], pa.int16()),
        "keep.priority": pa.array([3, None], pa.int8()),
        "lot": pa.array([None, None]),
        "extra.a": ["x", None],
        "extra.b": ["y", "y"],
    }
    demand = {
        "reference": ["SO-1"],
        "site": ["YARD"],
        "item": ["0025"],
        "quantity": [Decimal("880.5")],
        "priority": pa.array([2], pa.int64()),
        "origins": [["NORTH"]],
        "tags": [["b", "a|c"]],
    }
    expected = read(
        files(
            supply="site,item,quantity,as_of,best_before,keep.quantity,keep.priority,extra.a,extra.b\n"
            "NORTH,0025,900,2026-02-03T15:52:00.123456Z,2026-12-31,10,3,x,y\nNORTH,0025,1,,,,,,y\n",
            demand="reference,site,item,quantity,priority,origins,tags\n"
            'SO-1,YARD,0025,880.5,2,NORTH,"[""a|c"", ""b""]"\n',
        )
    )

    for ending, write in WRITERS:
        sent = files(supply=None, demand=None)
        sent |= {
            f"supply.{ending}": write(pa.table(supply)),
            f"demand.{ending}": write(pa.table(demand)),
        }
        assert digest(read(sent)) == digest(expected)


@pytest.mark.parametrize(
    "dates",
    [
        pa.array([dt.date(2026, 12, 31)], pa.date64()),
        pa.array([dt.datetime(2026, 12, 31)], pa.timestamp("ns")),  # noqa: DTZ001 - a date, as pandas has it
        pa.array(["2026-12-31"]),
    ],
    ids=lambda array: str(array.type),
)
def test_dates_have_several_types(dates: pa.Array) -> None:
    """Programs without a type for dates write midnight."""
    supply = {"site": ["NORTH"], "item": ["0025"], "quantity": [900], "best_before": dates}
    expected = read(files(supply="site,item,quantity,best_before\nNORTH,0025,900,2026-12-31\n"))

    report = read(with_table("supply", supply, "parquet", parquet_bytes))

    assert digest(report) == digest(expected)
    assert cautions(report) == {}


def test_a_time_of_day_is_no_date() -> None:
    """Cut to its date it might be the day before, somewhere."""
    late = pa.array([dt.datetime(2026, 12, 31, 23)], pa.timestamp("us"))  # noqa: DTZ001 - as sent
    supply = {"site": ["NORTH"], "item": ["0025"], "quantity": [900], "best_before": late}

    report = read(with_table("supply", supply, "arrow", arrow_bytes))

    assert places(report) == [
        ("supply.arrow!row 1,best_before", "bad_date", "2026-12-31 23:00:00.000000")
    ]


def test_equal_values_in_many_rows_are_as_many_faults() -> None:
    """Texts are read once, but whoever mends the file mends rows."""
    rows = 250
    wrong = {
        "origin": ["NORTH"] * rows,
        "destination": ["YRAD" if row % 2 else "YARD" for row in range(rows)],
        "unit_cost": pa.array(list(map(Decimal, range(rows))), pa.decimal128(9, 2)),
    }

    report = read(with_table("lanes", wrong, "parquet", parquet_bytes))

    assert report.fault_count == rows // 2
    assert places(report)[:2] == [
        ("lanes.parquet!row 2,destination", "unknown_site", "YRAD"),
        ("lanes.parquet!row 4,destination", "unknown_site", "YRAD"),
    ]


def test_a_dictionary_may_hold_what_no_row_has() -> None:
    """After filtering, programs keep the whole dictionary; nobody sent those values."""
    codes = pa.array([1, None, 1], pa.int8())
    column = pa.chunked_array(
        [
            pa.DictionaryArray.from_arrays(codes, ["unused", "used", None]),
            pa.DictionaryArray.from_arrays(pa.array([0, 1], pa.int8()), ["other", "used"]),
        ]
    )

    cells = text_cells(column)

    assert [cells.at(row) for row in range(5)] == ["used", None, "used", "other", "used"]
    assert "unused" not in cells.values


@pytest.mark.parametrize(
    "rows",
    [
        [["a", "b"], None, [], ["a", "b"], ["b", "a"]],
        [["a\x1fb"], ["a", "b"]],
        [[""], []],
        [[None], ["a"]],
        [],
    ],
)
@pytest.mark.parametrize("kind", [pa.list_(pa.string()), pa.large_list(pa.large_string())])
def test_lists_come_as_they_are(rows: list[list[str] | None], kind: pa.DataType) -> None:
    """Also such as no list of a network may be: the check must see what was sent."""
    cells = list_cells(pa.chunked_array([pa.array(rows, kind)]))

    assert [cells.at(row) for row in range(len(rows))] == rows


def chunked(values: Sequence[Decimal | None], scale: int) -> pa.ChunkedArray:
    """Return decimals in slices, as files are read."""
    whole = pa.array([Decimal(9), *values, Decimal(9)], pa.decimal128(38, scale))
    middle = whole.slice(1, len(values))
    half = len(values) // 2
    return pa.chunked_array([middle.slice(0, half), middle.slice(half)])


@pytest.mark.parametrize("scale", [0, 2, 6, 7, 18])
def test_scaled_integers_are_the_values(scale: int) -> None:
    """Sign, absence and slices; the exponent never hides a digit."""
    smallest = Decimal(1).scaleb(-min(scale, 6))
    values = [Decimal(0), None, smallest, -smallest, Decimal(10**12), -Decimal(10**12), None]

    found = exact_numbers(chunked(values, scale)).read(6)

    assert [found.decimals.fraction(row) for row in range(len(values))] == values
    assert (len(found.too_fine), len(found.too_large)) == (0, 0)


def test_numbers_are_shown_with_all_their_digits() -> None:
    """Whatever slice of a report asks for them."""
    numbers = ExactNumbers(
        values=np.array([-5, 1200, 0], dtype=np.int64),
        present=np.array([True, True, False]),
        exponent=3,
        too_fine=np.zeros(0, dtype=np.int64),
        too_large=np.array([2]),
        unheld={2: "1" * 30},
    )

    assert numbers[:] == ["-0.005", "1.2", "1" * 30]
    found = numbers.read(2)
    assert (found.too_fine.tolist(), found.too_large.tolist()) == ([0], [2])
