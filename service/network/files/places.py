"""Where a fault is in the files that a network came in, for each place in the definition.

Every check names the place that a value has in the definition, as an RFC 6901 pointer. Where the
definition came from files, a person needs file or sheet, row and column instead:
``lanes.csv!row 17,unit_cost``. A row is the number that a spreadsheet shows, so that the header is
row 1; Parquet and Arrow have no header, and their first row is row 1.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

from service.network.faults import Caution, Fault
from service.network.files.grids import Grid
from service.network.files.table_columns import Kind
from service.network.wording import is_note

DEFINITION_FILE = "network.json"


@dataclass(frozen=True, slots=True, kw_only=True)
class Places:
    """The files of one network: ``grids`` by table.

    ``packs`` leads from (item, number of the pack) in the definition to the row of ``packs``.
    ``of_files`` is False for a body of JSON, whose places are the pointers themselves.
    ``has_definition`` tells that there is a ``network.json`` too, for what no table holds.
    """

    grids: Mapping[str, Grid] = field(default_factory=dict)
    packs: Mapping[tuple[int, int], int] = field(default_factory=dict)
    of_files: bool = False
    has_definition: bool = False

    def of(self, pointer: str) -> str:
        """Return the place in the files; what is no pointer is a place already."""
        if not self.of_files or not pointer.startswith("/"):
            return pointer
        grid, row, names = self._found(pointer)
        if grid is not None:
            return grid.place(row=row, column=_column(grid, row, names) if names else None)
        if self.has_definition:
            return f"{DEFINITION_FILE}!{pointer}"
        return f"network!column {names[0]}" if names else pointer[1:]

    def fault(self, fault: Fault) -> Fault:
        """Return a fault with its place and its value as the files have them."""
        value = self._as_written(fault.pointer, fault.value)
        return replace(fault, pointer=self.of(fault.pointer), value=value)

    def caution(self, caution: Caution) -> Caution:
        """Return a doubt with its places as the files have them."""
        examples = tuple(
            (self.of(pointer), self._as_written(pointer, value))
            for pointer, value in caution.examples
        )
        return replace(caution, examples=examples)

    def set_aside(self, line: Mapping[str, object]) -> dict[str, object]:
        """Return an order line that was set aside, with its places as the files have them."""
        errors = line["errors"]
        assert isinstance(errors, list)  # noqa: S101 - our own document
        return {
            **line,
            "pointer": self.of(str(line["pointer"])),
            "errors": [self.fault(Fault.from_document(error)).to_document() for error in errors],
        }

    def _as_written(self, pointer: str, value: str | None) -> str | None:
        """Return a value with the decimal mark of its file."""
        if not self.of_files or not pointer.startswith("/"):
            return value
        grid, row, names = self._found(pointer)
        if grid is None or value is None or not grid.decimal_comma or not names:
            return value
        return swapped(value) if grid.kind(_column(grid, row, names)) is Kind.NUMBER else value

    def _found(self, pointer: str) -> tuple[Grid | None, int | None, Sequence[str]]:
        """Return the table, the row and the names inside it that a pointer leads to."""
        names = [part.replace("~1", "/").replace("~0", "~") for part in pointer[1:].split("/")]
        table = names[0]
        if table not in _LISTS:
            is_head = table != "control"
            return self.grids.get("network" if is_head else table), 0, names[not is_head :]
        grid = self.grids.get(table)
        if grid is None or len(names) == 1 or not names[1].isdigit():
            return grid, None, names[1:]
        row, inner = int(names[1]), names[2:]
        packs = self.grids.get("packs")
        if packs is None or table != "items" or inner[:1] != ["packs"]:
            return grid, row, inner
        if len(inner) == 1:
            return grid, row, ()
        return packs, self.packs[row, int(inner[1])], inner[2:]


def swapped(number: str) -> str:
    """Return a number with its comma and its point exchanged."""
    return number.translate(_SWAP)


_SWAP = str.maketrans(",.", ".,")
_LISTS = frozenset(
    {"items", "sites", "supply", "demand", "lanes", "rules", "exchange_rates", "tariffs"}
    | {"storage"}
)


def _column(grid: Grid, row: int | None, names: Sequence[str]) -> str:
    """Return the column that holds the value of ``names``, positions in a list left out.

    The longest name that is a column is it. A value that several columns make up (``extra``) is in
    the one of them whose cell is wrong by itself; one that is missing is called as its column
    would be.
    """
    steps = [name for name in names if not name.isdigit()] or list(names)
    for parts in (list(names), steps):
        for count in range(len(parts), 0, -1):
            name = ".".join(parts[:count])
            if name in grid.columns:
                return name
    family = [column for column in grid.columns if column.startswith(f"{steps[0]}.")]
    if len(steps) > 1 or not family:
        return ".".join(steps)
    if len(family) > 1 and row is not None:
        wrong = [name for name in family if _is_wrong(grid.columns[name].at(row))]
        family = wrong or [steps[0]]
    return family[0] if row is not None or len(family) == 1 else steps[0]


def _is_wrong(cell: object) -> bool:
    """Return whether a cell cannot be one of a pair of texts."""
    return cell is not None and not (type(cell) is str and is_note(cell))
