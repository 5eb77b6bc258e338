"""Arrays read by array operations mean what the exact reader finds, to the last fault."""

import json
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.network.canonical import network_digest
from service.network.faults import in_order
from service.network.files.json import ReadJson, read_json
from service.network.files.json_arrays import (
    scan_grid,
    scan_numbers,
    scan_quoted_numbers,
    scan_texts,
)
from service.network.files.json_blocks import LEAD
from service.network.files.json_rows import scan_rows
from service.network.files.json_tables import cut_tables
from service.network.options import Options
from service.network.quantities import RATE_DECIMALS_MAX, read_decimals
from service.network.reading import read_network
from service.network.scanned import FieldKind, ScannedNumbers
from service.network.table_fields import FLAT_FIELDS
from tests.network_samples import sound

KINDS = {
    "origin": FieldKind.TEXT,
    "destination": FieldKind.TEXT,
    "carrier": FieldKind.TEXT,
    "id": FieldKind.ID,
    "unit_cost": FieldKind.NUMBER,
    "cap": FieldKind.NUMBER,
}
STYLES: Sequence[dict[str, Any]] = (
    {"separators": (",", ":")},
    {},
    {"indent": 2},
    {"separators": (",\r\n\t", " :  ")},
)
# White space, brackets and separators inside of texts must not be taken for structure.
TEXTS = (
    "",
    "a",
    "DEP-1",
    "YARD-000017",
    "X" * 64,
    "é",
    "海" * 9,
    "},{",
    '":',
    ",",
    "]",
    "null",
    "7x",
)
NUMBERS = ("0", "-0", "7", "-1.25", "123456.654321", "999999999999", "0.000001", "10.500")
ODD = (
    *("true", "NaN", "01", "1.", ".5", "+1", "1e3", "1 2", "nul", "-", "[1]", "{}", '"a', "1,"),
    *("1.2345678", "12345678901234567", "4611686018427387904", '"null"', '" 1"', '"\\u0031"'),
    *(
        '"x"',
        '"7.5"',
        '"\t"',
        "null",
        "0",
        '"DEP-NORTH"',
        '"YARD-07"',
        '""',
        "-1",
        "5",
        "5.0",
        '"5"',
    ),
)

texts = st.lists(st.none() | st.sampled_from(TEXTS), min_size=1, max_size=40)
numbers = st.lists(st.none() | st.sampled_from(NUMBERS), min_size=1, max_size=40)
blocks = st.integers(min_value=300, max_value=2000)


def bare(values: Sequence[str | None], comma: str) -> str:
    """Return numbers as JSON writes them, without quotes."""
    return comma.join("null" if value is None else value for value in values)


def same_numbers(scanned: ScannedNumbers | None, values: Sequence[str | None]) -> None:
    """Check that numbers were read, as they were sent and as the exact reader has them."""
    assert scanned is not None
    assert list(scanned) == list(values)
    exact = read_decimals(
        ["" if value is None else value for value in values],
        present=np.array([value is not None for value in values]),
        decimals_max=RATE_DECIMALS_MAX,
    ).decimals
    found = scanned.read(RATE_DECIMALS_MAX).decimals
    assert found.exponent == exact.exponent
    assert found.values.tolist() == exact.values.tolist()
    assert found.present.tolist() == exact.present.tolist()


@given(values=texts, style=st.sampled_from(STYLES), block_bytes=blocks)
def test_texts_are_found_whatever_stands_in_them(
    values: list[str | None], style: dict[str, Any], block_bytes: int
) -> None:
    """A text is found between its quotes, also where a block ends in it."""
    text = json.dumps(values, ensure_ascii=False, **style).encode()
    hidden = any('"' in value for value in values if value)

    scanned = scan_texts(text, 1, len(text) - 1, block_bytes=block_bytes)

    assert scanned is None if hidden else scanned is not None
    assert scanned is None or list(scanned) == values


@given(values=numbers, comma=st.sampled_from([",", ", ", ",\n  ", " ,"]), block_bytes=blocks)
def test_numbers_keep_every_digit(values: list[str | None], comma: str, block_bytes: int) -> None:
    """Numbers go from digits to integers, never through a float."""
    text = f"[ {bare(values, comma)}\n]".encode()

    same_numbers(scan_numbers(text, 1, len(text) - 1, block_bytes=block_bytes), values)


@given(values=numbers, style=st.sampled_from(STYLES), block_bytes=blocks)
def test_numbers_sent_as_texts_keep_every_digit(
    values: list[str | None], style: dict[str, Any], block_bytes: int
) -> None:
    """Exact clients send decimals in quotes."""
    text = json.dumps(values, **style).encode()

    scanned = scan_quoted_numbers(text, 1, len(text) - 1, block_bytes=block_bytes)

    same_numbers(scanned, values)


@given(
    rows=st.integers(min_value=1, max_value=6).flatmap(
        lambda width: st.lists(
            st.lists(st.none() | st.sampled_from(NUMBERS), min_size=width, max_size=width),
            min_size=1,
            max_size=6,
        )
    ),
    comma=st.sampled_from([",", ", "]),
    between=st.sampled_from(["],[", "] ,\n [", "], ["]),
)
def test_cost_tables_are_read_row_after_row(
    rows: list[list[str | None]], comma: str, between: str
) -> None:
    """The costs of a table are its rows, one after the other."""
    text = f"[[{between.join(bare(row, comma) for row in rows)}] ],".encode()

    grid = scan_grid(text, 2)

    assert grid is not None
    assert (grid[0].height, grid[0].width, text[grid[1] :]) == (len(rows), len(rows[0]), b",")
    same_numbers(grid[0].numbers, [value for row in rows for value in row])


@pytest.mark.parametrize("digits", [1, 7, 8, 9, 15, 16])
@pytest.mark.parametrize("decimals", [0, 1, 6])
@pytest.mark.parametrize("sign", ["", "-"])
def test_numbers_are_read_up_to_two_words(digits: int, decimals: int, sign: str) -> None:
    """Sixteen characters are read, whichever word the point is in; longer ones are left alone."""
    plain = "9182736450918273"[:digits]
    number = sign + (plain if not decimals else f"{plain[:-decimals] or '0'}.{plain[-decimals:]}")
    text = f"[{number}]".encode()

    scanned = scan_numbers(text, 1, len(text) - 1)

    if len(number) > LEAD:
        assert scanned is None
    else:
        same_numbers(scanned, [number])


@pytest.mark.parametrize("token", ODD)
def test_what_is_no_plain_number_is_left_to_the_exact_reader(token: str) -> None:
    """Neither a fault nor a longer number is guessed at."""
    if token in {"null", "0", "-1", "5", "5.0"}:
        return
    text = f"[1,2.5,{token},3]".encode()

    assert scan_numbers(text, 1, len(text) - 1) is None


@pytest.mark.parametrize(
    "text", ["[[1,2],[3]]", "[[1,2],[3,4]", "[[1],[2],3]", "[[1,[2]]", "[[1]2]"]
)
def test_a_table_that_is_no_rectangle_is_left_to_the_exact_reader(text: str) -> None:
    """Which row is too short is for the exact reader to say."""
    assert scan_grid(text.encode(), 2) is None


row = st.fixed_dictionaries(
    {},
    optional={
        name: st.none() | st.sampled_from(NUMBERS if kind is FieldKind.NUMBER else TEXTS)
        for name, kind in KINDS.items()
    },
).filter(bool)


@given(
    rows=st.lists(row, min_size=2, max_size=20),
    style=st.sampled_from(STYLES[:3]),
    bare_numbers=st.booleans(),
    block_bytes=st.integers(min_value=900, max_value=4000),
)
def test_rows_become_columns(
    rows: list[dict[str, str | None]],
    style: dict[str, Any],
    bare_numbers: bool,  # noqa: FBT001 - drawn by its name
    block_bytes: int,
) -> None:
    """Each value comes to its name and row; what a row lacks is null."""
    text = json.dumps(rows, ensure_ascii=False, **style)
    if bare_numbers:
        for number in NUMBERS:
            for colon in (":", ": "):
                text = text.replace(f'{colon}"{number}"', f"{colon}{number}")

    scanned = scan_rows(
        text.encode() + b"}",
        0,
        kinds=KINDS,
        decode=lambda one: json.loads(one, parse_int=str, parse_float=str),
        block_bytes=block_bytes,
    )

    if scanned is None:
        # The first object shows how members are parted; a quote inside of a text is escaped.
        assert len(rows[0]) == 1 or "\\" in text
        return
    assert scanned[1] == len(text.encode())
    for name in {name for one in rows for name in one}:
        values = [one.get(name) for one in rows]
        column = scanned[0].columns[name]
        assert list(column) == values
        if isinstance(column, ScannedNumbers):
            same_numbers(column, values)


def outcome(read: ReadJson, options: Options) -> object:
    """Return all that a reader of a network says of it."""
    if read.unreadable or read.invalid:
        return read.unreadable, read.invalid
    reading = read_network(read.value, options)
    faults = reading.faults
    return (
        in_order(faults.kept, read.value),
        faults.count,
        faults.cautions,
        reading.set_aside,
        reading.counts,
        None if reading.network is None else network_digest(reading.network),
    )


def both(text: bytes, *, set_aside: bool = False) -> tuple[object, object]:
    """Return what the exact reader says of a text, and what it says with scanned tables."""
    options = Options(bad_rows="set_aside" if set_aside else "refuse")
    exact = outcome(read_json(text, nesting_max=16), options)
    fast = read_json(text, nesting_max=16, tables=FLAT_FIELDS, large_bytes=0)
    return exact, outcome(fast, options)


def as_columns(rows: Sequence[dict[str, Any]]) -> dict[str, list[Any]]:
    """Return rows as columns."""
    names = dict.fromkeys(name for row in rows for name in row)
    return {name: [row.get(name) for row in rows] for name in names}


def lanes_of(form: str) -> object:
    """Return the lanes of the sample in one of the forms."""
    rows = sound()["lanes"]
    grid = {
        "origins": ["DEP-NORTH", "X"],
        "destinations": ["YARD-07", "X"],
        "unit_cost": [["0.215", 3], [0.5, None]],
        "capacity": [[2000, None], ["7.5", None]],
        "per": "item",
    }
    forms: dict[str, Callable[[], object]] = {
        "rows": lambda: rows,
        "columns": lambda: as_columns(rows),
        "table": lambda: grid,
        "tables": lambda: [grid, {**grid, "unit_cost": [[1, 2], [3, None]], "carrier": "C"}],
    }
    return forms[form]()


FORMS = ("rows", "columns", "table", "tables")


def document(form: str) -> dict[str, Any]:
    """Return the sample with its lanes, order lines and stock in one form."""
    made = sound()
    made["lanes"] = lanes_of(form)
    del made["control"]
    if form != "rows":
        made["demand"], made["supply"] = as_columns(made["demand"]), as_columns(made["supply"])
    return made


@pytest.mark.parametrize("form", FORMS)
def test_the_tables_of_the_sample_are_scanned(form: str) -> None:
    """The other tests would compare the exact reader with itself if nothing were cut out."""
    text = json.dumps(document(form)).encode()

    rest, cuts = cut_tables(text, FLAT_FIELDS, json.loads, large_bytes=0)

    assert cuts
    assert len(rest) < len(text)


places = st.floats(min_value=0, max_value=1, exclude_max=True)


@given(
    form=st.sampled_from(FORMS),
    style=st.sampled_from(STYLES),
    token=st.none() | st.sampled_from(ODD),
    where=places,
    set_aside=st.booleans(),
)
def test_a_changed_value_has_one_outcome(
    form: str,
    style: dict[str, Any],
    token: str | None,
    where: float,
    set_aside: bool,  # noqa: FBT001 - drawn by its name
) -> None:
    """Same digest or same faults, whatever stands in the place of any one value."""
    made = document(form)
    mark = "MARK"
    slots = list(_slots(made))
    if token is not None:
        holder, key = slots[int(where * len(slots))]
        holder[key] = mark
    text = json.dumps(made, ensure_ascii=False, **style).replace(f'"{mark}"', token or mark)

    exact, fast = both(text.encode(), set_aside=set_aside)

    assert fast == exact


def _slots(value: Any) -> Any:  # noqa: ANN401 - JSON
    """Yield every (container, key) of a document's tables that holds no container."""
    waiting = [value[name] for name in ("lanes", "demand", "supply")]
    while waiting:
        holder = waiting.pop()
        keys = holder if isinstance(holder, dict) else range(len(holder))
        for key in keys:
            if isinstance(holder[key], dict | list):
                waiting.append(holder[key])
            else:
                yield holder, key


@given(
    form=st.sampled_from(FORMS),
    style=st.sampled_from(STYLES),
    where=places,
    size=st.integers(min_value=0, max_value=3),
    patch=st.sampled_from(
        [
            *'"\\,:[]{} \t\n01-.eE#a\0',
            "",
            "null",
            "[]",
            "{}",
            '":"',
            "},{",
            "]]",
            "\xff",
            "é",
            "\\u0061",
        ]
    ),
)
def test_a_damaged_text_has_one_outcome(
    form: str, style: dict[str, Any], where: float, size: int, patch: str
) -> None:
    """Same digest or same faults, whatever happens to a few bytes anywhere."""
    text = json.dumps(document(form), **style).encode()
    place = int(where * len(text))
    damaged = text[:place] + patch.encode("latin-1") + text[place + size :]

    exact, fast = both(damaged)

    assert fast == exact


def test_faults_in_scanned_tables_point_to_their_rows(tmp_path: Path) -> None:
    """Unknown sites, too many decimals and negative numbers are found without a list of values."""
    del tmp_path
    count = 400
    lanes = {
        "origin": ["DEP-NORTH"] * count,
        "destination": ["YARD-07"] * (count - 1) + ["NOWHERE"],
        "item": ["ROAD-25"] * count,
        "carrier": [f"C-{number}" for number in range(count)],
        "unit_cost": [f"{number}.5" for number in range(count - 1)] + ["1.0000001"],
        "capacity": [5] * 7 + [-1, "1.2345"] + [None] * (count - 9),
    }
    text = json.dumps({**document("columns"), "lanes": lanes}).encode()

    exact, fast = both(text)

    assert fast == exact
    assert {fault.pointer for fault in exact[0]} == {  # type: ignore[index] # the list of faults
        "/lanes/destination/399",
        "/lanes/unit_cost/399",
        "/lanes/capacity/7",
        "/lanes/capacity/8",
    }
