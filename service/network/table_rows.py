"""Rows of a table picked or put in order, and tests of quantities by groups of rows."""

from collections.abc import Iterator, Sequence
from dataclasses import fields, replace
from fractions import Fraction
from math import gcd
from typing import TypeVar

import numpy as np

from service.network.column_making import no_decimals, no_texts, used_only
from service.network.columns import (
    BoolArray,
    CodeArray,
    Decimals,
    DemandTable,
    IntArray,
    Item,
    LaneTable,
    SupplyTable,
    Texts,
)
from service.network.quantities import least_exponent

_Table = TypeVar("_Table", SupplyTable, DemandTable, LaneTable)


def rows_of(table: _Table, rows: IntArray) -> _Table:
    """Return ``rows`` of a table, in their order, its columns in their one spelling."""
    if len(rows) == len(table) and bool((rows == np.arange(len(rows))).all()):
        return _spelled(table)
    changed: dict[str, object] = {}
    for field in fields(table):
        column = getattr(table, field.name)
        if isinstance(column, Texts):
            changed[field.name] = used_only(_texts_of(column, rows))
        elif isinstance(column, Decimals):
            changed[field.name] = _decimals_of(column, rows)
        else:
            changed[field.name] = column[rows]
    return replace(table, **changed)  # type: ignore[arg-type] # each of its field's own type


def _texts_of(column: Texts, rows: IntArray) -> Texts:
    """Return ``rows`` of a column of texts."""
    if not column.values:
        return no_texts(len(rows))
    if column.codes.strides == (0,):
        # One text in all rows.
        return replace(column, codes=np.broadcast_to(column.codes[0], len(rows)))
    return replace(column, codes=column.codes[rows])


def _decimals_of(column: Decimals, rows: IntArray) -> Decimals:
    """Return ``rows`` of a column of numbers."""
    if not column.present.any():
        return no_decimals(len(rows))
    return least_exponent(column.values[rows], column.present[rows], column.exponent)


def _spelled(table: _Table) -> _Table:
    """Return all rows of a table, its columns in their one spelling."""
    changed: dict[str, object] = {}
    for field in fields(table):
        column = getattr(table, field.name)
        if isinstance(column, Texts):
            changed[field.name] = used_only(column)
        elif isinstance(column, Decimals):
            changed[field.name] = least_exponent(column.values, column.present, column.exponent)
    return replace(table, **changed)  # type: ignore[arg-type] # each of its field's own type


def by_item_and_text(
    items: CodeArray, texts: Texts, rows: IntArray
) -> Iterator[tuple[int, str, IntArray]]:
    """Yield each pair of an item's position and a text that occurs in ``rows``, with its rows.

    Rows must have both.
    """
    width = max(1, len(texts.values))
    keys = items[rows].astype(np.int64) * width + texts.codes[rows]
    if bool((keys[1:] >= keys[:-1]).all()):
        order = np.arange(len(keys))
    else:
        # Short keys are sorted by their digits, in one pass over the rows for each.
        short = int(keys.max(initial=0)) <= np.iinfo(np.uint16).max
        order = np.argsort(keys.astype(np.uint16) if short else keys, kind="stable")
        keys = keys[order]
    starts = np.flatnonzero(np.concatenate(([True], keys[1:] != keys[:-1]))) if len(keys) else keys
    for key, members in zip(
        keys[starts].tolist(), np.split(rows[order], starts[1:]), strict=len(keys) > 0
    ):
        yield key // width, texts.values[key % width], members


def off_grid(column: Decimals, rows: IntArray, grain: Fraction) -> IntArray:
    """Return those of ``rows`` whose value is no whole multiple of ``grain`` (above 0)."""
    scale = 10**column.exponent * grain.numerator
    divisor = scale // gcd(scale, grain.denominator)
    values = column.values[rows]
    # A divisor beyond 62 bits divides nothing that fits in a column, except 0.
    off: BoolArray = values != 0 if divisor >= 2**62 else values % divisor != 0
    found: IntArray = rows[off]
    return found


def with_units(unit: Texts, item: CodeArray, items: Sequence[Item]) -> Texts:
    """Return the units of rows; a row that names none has its item's own unit."""
    missing: BoolArray = (unit.codes < 0) & (item >= 0)
    if not missing.any():
        return unit
    values = sorted({*unit.values, *(thing.unit for thing in items)})
    code = {text: number for number, text in enumerate(values)}
    of_item = np.array([code[thing.unit] for thing in items], dtype=np.int32)
    of_text = np.array([*(code[text] for text in unit.values), -1], dtype=np.int32)
    codes = of_text[unit.codes]
    codes[missing] = of_item[item[missing]]
    return used_only(Texts(codes=codes, values=tuple(values)))


def with_measure(measure: Texts) -> Texts:
    """Return the measures of lanes; a lane that names none is measured in units."""
    if not measure.values:
        return Texts(codes=np.broadcast_to(np.int32(0), len(measure.codes)), values=("unit",))
    values = tuple(sorted({*measure.values, "unit"}))
    code = {text: number for number, text in enumerate(values)}
    of_text = np.array([*(code[text] for text in measure.values), code["unit"]], dtype=np.int32)
    return used_only(Texts(codes=of_text[measure.codes], values=values))
