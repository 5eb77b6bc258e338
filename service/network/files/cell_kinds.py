"""Cells of each kind of column brought to what the readers of a definition expect in JSON."""

from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import Final

from service.network.faults import Odd
from service.network.files.grids import Cells, Grid
from service.network.files.json import Number, read_json
from service.network.files.table_columns import LIST_SEPARATOR, Kind

LIST_ADVICE: Final = (
    "Not a list. Write texts with | between, or a JSON array of texts where one has | in it."
)
PAIRS_ADVICE: Final = 'Not a JSON object of texts, such as {"route": "R7"}.'
OBJECTS_ADVICE: Final = "Not a JSON array of objects, such as [{...}, {...}]."
_NESTING_MAX: Final = 2


def with_values(grid: Grid) -> Grid:
    """Return a grid whose cells are values: lists, whole numbers and pairs besides texts."""
    columns = {}
    for name, cells in grid.columns.items():
        kind = grid.kind(name)
        reader = None if kind is None else _READERS.get(kind)
        columns[name] = cells if reader is None else _read(cells, reader)
    return replace(grid, columns=columns)


def _read(cells: Cells, reader: Callable[[str], object]) -> Cells:
    """Return cells read one by one; texts that are equal are read once."""
    known: dict[str, object] = {}
    values: list[object] = []
    odd = dict(cells.odd)
    for position, cell in enumerate(cells.values):
        # A number of a workbook's cell is one already.
        if type(cell) is not str:
            values.append(cell)
            continue
        if cell not in known:
            known[cell] = reader(cell)
        value = known[cell]
        if isinstance(value, Odd):
            odd[position] = value
            value = None
        values.append(value)
    return replace(cells, values=values, odd=odd)


def _list(text: str) -> object:
    """Read a list of texts."""
    if not text.startswith("["):
        return text.split(LIST_SEPARATOR)
    found = read_json(text.encode("utf-8", "surrogatepass"), nesting_max=_NESTING_MAX)
    if found.unreadable or found.invalid or not isinstance(found.value, list):
        return Odd("bad_list", LIST_ADVICE, text)
    return found.value


def _flag(text: str) -> object:
    """Read true or false, also as spreadsheets write it."""
    return {"true": True, "false": False}.get(text.lower(), text)


def _objects(text: str) -> object:
    """Read an array of objects."""
    found = read_json(text.encode("utf-8", "surrogatepass"), nesting_max=_NESTING_MAX + 1)
    if found.unreadable or found.invalid or not isinstance(found.value, list):
        return Odd("bad_list", OBJECTS_ADVICE, text)
    return found.value


def _pairs(text: str) -> object:
    """Read pairs of texts."""
    found = read_json(text.encode("utf-8", "surrogatepass"), nesting_max=_NESTING_MAX)
    if found.unreadable or found.invalid or not isinstance(found.value, dict):
        return Odd("bad_extra", PAIRS_ADVICE, text)
    return found.value


_READERS: Final[Mapping[Kind, Callable[[str], object]]] = {
    Kind.WHOLE: Number,
    Kind.LIST: _list,
    Kind.PAIRS: _pairs,
    Kind.OBJECTS: _objects,
    Kind.FLAG: _flag,
}
