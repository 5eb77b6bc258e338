"""Arrays read by array operations mean what the exact reader finds, to the last fault."""

import json
from collections.abc import Sequence
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.network.files.json_arrays import (
    scan_grid,
    scan_numbers,
    scan_quoted_numbers,
    scan_texts,
)
from service.network.files.json_blocks import LEAD
from service.network.files.json_rows import scan_rows
from service.network.quantities import RATE_DECIMALS_MAX, read_decimals
from service.network.scanned import FieldKind, ScannedNumbers

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
        # The first object shows how members are parted; a quote inside of a text is escaped; an
        # empty id is left to the exact reader to refuse.
        assert len(rows[0]) == 1 or "\\" in text or any(one.get("id") == "" for one in rows)
        return
    assert scanned[1] == len(text.encode())
    for name in {name for one in rows for name in one}:
        values = [one.get(name) for one in rows]
        column = scanned[0].columns[name]
        assert list(column) == values
        if isinstance(column, ScannedNumbers):
            same_numbers(column, values)
