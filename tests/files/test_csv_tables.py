"""Tables as CSV files: every fault has its file, row and column, and nothing is passed over."""

import gzip
from typing import Any, cast

import pytest
import zstandard

from service.network.options import Options
from tests.files.reading import TABLES, digest, files, places, read

PLAIN = digest(read(files()))


def test_zeros_in_front_of_ids_stay() -> None:
    """0025 is another item than 25."""
    report = read(files(supply="site,item,quantity\nNORTH,25,900\n"))

    assert places(report) == [("supply.csv!row 2,item", "unknown_item", "25")]


def test_rows_are_numbered_as_a_spreadsheet_shows_them() -> None:
    """Empty rows count, cells with line ends are one row, and the header is row 1."""
    demand = (
        'reference,site,item,quantity,extra.note\n\n"SO-1",YARD,0025,1,"two\nlines"\n,,,,\n'
        "SO-2,NOWHERE,0025,1,\n"
    )

    report = read(files(demand=demand))

    assert places(report) == [("demand.csv!row 5,site", "unknown_site", "NOWHERE")]


@pytest.mark.parametrize(
    ("lanes", "place"),
    [
        ("origin,destination,unit_cost\nNORTH,YARD\n", "This row has 2 cells, the header 3."),
        ("origin,destination,unit_cost\nNORTH,YARD,1,2\n", "This row has 4 cells, the header 3."),
    ],
)
def test_uneven_rows_are_faults(lanes: str, place: str) -> None:
    """A quote that was forgotten moves every cell behind it."""
    report = read(files(lanes=lanes))

    assert ("lanes.csv!row 2", "uneven_row", None) in places(report)
    assert any(place in fault.detail for fault in report.faults)


def test_empty_cells_beyond_the_header_are_none() -> None:
    """Spreadsheet programs leave such commas behind."""
    lanes = "origin,destination,unit_cost\nNORTH,YARD,0.215,,\n"

    assert digest(read(files(lanes=lanes))) == PLAIN


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("", ("lanes.csv", "empty_file", None)),
        (" \n", ("lanes.csv", "empty_file", None)),
        ('origin,destination,unit_cost\n"NORTH,YARD,1\n', ("lanes.csv", "broken_csv", None)),
        ('origin,destination,unit_cost\n"N"ORTH,YARD,1\n', ("lanes.csv", "broken_csv", None)),
    ],
)
def test_what_is_no_csv_is_a_fault(text: str, told: tuple[str, str, None]) -> None:
    """The reader stops at the file, not at the network: other files are read as well."""
    assert places(read(files(lanes=text))) == [told]


def test_every_fault_of_every_file_is_found_at_once() -> None:
    """Columns, cells and tables; in the order of the tables and rows."""
    report = read(
        files(
            items="id,unit,colour,divisible\n0025,,red,1\n",
            lanes="origin,destination,unit_cost,unit_cost,\nNORTH,YARD,1,2,\nNORTH,YARD,1,2,3\n",
            demand="reference,site,item,quantity,priority\nSO-1,YARD,0025,1.2345,11\n",
        )
    )

    assert sorted(places(report)) == [
        ("demand.csv!row 2,priority", "bad_number", "11"),
        ("demand.csv!row 2,quantity", "too_many_decimals", "1.2345"),
        ("items.csv!column colour", "unknown_field", None),
        ("items.csv!column divisible", "not_yet", None),
        ("items.csv!row 2,unit", "missing_field", None),
        ("lanes.csv", "unnamed_column", None),
        ("lanes.csv!column unit_cost", "duplicate_column", "unit_cost"),
    ]


def test_a_missing_column_is_one_fault() -> None:
    """A thousand rows without a column have one mistake."""
    rows = "NORTH,YARD\n" * 1000
    report = read(files(lanes=f"origin,destination\n{rows}"))

    assert places(report) == [("lanes.csv!column unit_cost", "missing_field", None)]


def test_missing_tables_are_named() -> None:
    """Every one at once."""
    report = read(files(lanes=None, sites=None, network=None))

    assert sorted(told for told in places(report) if told[1] != "unknown_site") == [
        ("lanes", "missing_table", None),
        ("network!column currency", "missing_field", None),
        ("network!column cut_off", "missing_field", None),
        ("network!column format", "missing_field", None),
        ("sites", "missing_table", None),
    ]


def test_control_totals_of_files_are_checked() -> None:
    """A file that was cut off on its way must not be planned with."""
    control = "field,value\ndemand_rows,1\ndemand_quantity,881.5\nlane_rows,2\n"

    report = read(files(control=control))

    assert sorted(places(report)) == [
        ("control.csv!row 3,value", "control_mismatch", "881.5"),
        ("control.csv!row 4,value", "control_mismatch", "2"),
    ]
    right = control.replace("881.5", "880.5").replace("lane_rows,2", "lane_rows,1")
    assert digest(read(files(control=right))) == PLAIN


def test_a_row_that_is_set_aside_says_where_it_stood() -> None:
    """The list goes to whoever sent the file."""
    demand = TABLES["demand"] + "SO-2,NOWHERE,0025,1\n"

    report = read(files(demand=demand), options=Options(bad_rows="set_aside"))

    assert report.summary is not None
    (aside,) = cast("list[dict[str, Any]]", report.summary["set_aside"])
    assert aside["pointer"] == "demand.csv!row 3"
    assert aside["errors"][0]["pointer"] == "demand.csv!row 3,site"


def test_files_may_be_packed_and_lie_in_one_folder() -> None:
    """Whoever zips a folder zips its name too, and desktops add files of their own."""
    sent = files()
    packed = {
        "evening/lanes.csv.gz": gzip.compress(sent.pop("lanes.csv")),
        "evening/Demand.CSV.zst": zstandard.compress(sent.pop("demand.csv")),
        "__MACOSX/evening/._lanes.csv": b"\x00",
        "evening/.DS_Store": b"\x00",
    }

    report = read({f"evening/{name}": data for name, data in sent.items()} | packed)

    assert digest(report) == PLAIN


@pytest.mark.parametrize(
    ("name", "place"),
    [
        ("lane.csv", ("lane.csv", "unknown_file", None)),
        ("lanes.txt", ("lanes.txt", "unknown_file", None)),
        ("more/lanes.csv", ("more/lanes.csv", "unknown_file", None)),
        ("lanes.csv.gz", ("lanes.csv.gz", "duplicate_table", None)),
        ("network.json", ("network.csv", "duplicate_table", None)),
    ],
)
def test_a_file_too_many_is_a_fault(name: str, place: tuple[str, str, None]) -> None:
    """Nothing that was sent is ever ignored."""
    content = b'{"format": 1}' if name == "network.json" else b"id\n"

    assert places(read(files() | {name: content})) == [place]


def test_small_tables_may_be_json() -> None:
    """The parts that no file holds; a fault in it has its place in it."""
    sent = files(items=None, network=None, control=None)
    definition = (
        b'{"format": 1, "currency": "EUR", "cut_off": "2026-02-03T16:00:00+01:00",'
        b' "items": [{"id": "0025", "unit": %s, "step": "0.1"}], "control": {"lane_rows": 1}}'
    )

    assert digest(read(sent | {"network.json": definition % b'"bag"'})) == PLAIN
    assert places(read(sent | {"network.json": definition % b"1"})) == [
        ("network.json!/items/0/unit", "wrong_type", "1")
    ]
    assert places(read(sent | {"network.json": b"{"})) == [("network.json", "not_json", "")]


def test_a_network_of_one_row_or_of_pairs_is_the_same() -> None:
    """A row for machines, pairs for people."""
    pairs = "field,value\nformat,1\ncurrency,EUR\ncut_off,2026-02-03T16:00:00+01:00\n"

    assert digest(read(files(network=pairs))) == PLAIN
    report = read(files(network=pairs + "currency,NOK\nspeed,9\nname,\n"))
    assert places(report) == [
        ("network.csv!row 5,field", "duplicate_name", "currency"),
        ("network.csv!row 6,field", "unknown_field", None),
    ]
