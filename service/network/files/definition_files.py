"""A network that came as files, read into the one form that the readers of a definition take."""

import gc
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Final

from service.network.faults import Fault, FaultList
from service.network.files.arrow_tables import read_arrow
from service.network.files.big_tables import sheet_of_grid
from service.network.files.cell_kinds import with_values
from service.network.files.csv_tables import read_csv, read_dialect
from service.network.files.decimal_marks import with_decimal_points
from service.network.files.grids import Grid
from service.network.files.json import read_json
from service.network.files.media_types import XLSX
from service.network.files.package import Package, TableFile, read_package
from service.network.files.places import DEFINITION_FILE, Places
from service.network.files.small_tables import head_of, pack_rows, rules_of_grid, things_of
from service.network.files.table_columns import WANTED
from service.network.files.workbook import read_workbook
from service.network.files.zips import Allowance, HostileZipError, TooLargeError
from service.network.table_fields import FLAT_FIELDS

_BIG: Final = ("supply", "demand", "lanes")
_ORDER: Final = (
    *("items", "sites", "supply", "demand", "lanes", "rules", "exchange_rates", "tariffs"),
    *("storage", "control"),
)


@dataclass(frozen=True, slots=True, kw_only=True)
class FilesRead:
    """What files held: a definition with ``Sheet`` tables, or the fault that stopped the reading.

    ``places`` leads from a place in the definition to the one in the files. ``faults`` are what
    was found on the way; ``document`` is None where nothing more can be checked.
    """

    document: dict[str, object] | None
    places: Places
    faults: FaultList
    unreadable: Fault | None = None
    too_large: bool = False


def read_files(
    path: Path, folder: Path, *, media_type: str, bytes_max: int, nesting_max: int
) -> FilesRead:
    """Read a zip of tables or a workbook; what is unpacked lies in ``folder`` meanwhile."""
    faults = FaultList()
    allowance = Allowance(bytes_left=bytes_max)
    try:
        if media_type == XLSX:
            with _uncollected():
                grids = read_workbook(path, allowance, faults)
            return _put_together(grids, None, faults)
        with TemporaryDirectory(dir=folder) as name, _uncollected():
            package = read_package(path, Path(name), allowance, faults)
            return _read_package(package, faults, nesting_max)
    except HostileZipError as error:
        fault = Fault(pointer="", code=error.code, detail=error.detail)
        return FilesRead(document=None, places=Places(), faults=faults, unreadable=fault)
    except TooLargeError as error:
        detail = str(error) or f"The files have more than {bytes_max} bytes when unpacked."
        fault = Fault(pointer="", code="body_too_large", detail=detail)
        return FilesRead(
            document=None, places=Places(), faults=faults, unreadable=fault, too_large=True
        )


@contextmanager
def _uncollected() -> Iterator[None]:
    """Look for no cycles of garbage in the block: millions of cells have none.

    To go through them again and again took half the time of a million rows of CSV (2.1 instead of
    4.2 s; Python 3.11, 2 cores).
    """
    was_enabled = gc.isenabled()
    gc.disable()
    try:
        yield
    finally:
        if was_enabled:
            gc.enable()


def _read_package(package: Package, faults: FaultList, nesting_max: int) -> FilesRead:
    """Read every table of a zip, and its definition if it has one."""
    dialect = read_dialect(package.dialect, faults)
    texts: dict[str, Grid] = {}
    separators: dict[str, str] = {}
    grids: dict[str, Grid] = {}
    whole = True
    for table, file in package.tables.items():
        if file.form != "csv":
            grids[table] = read_arrow(file, faults)
            continue
        found = read_csv(file, dialect, faults)
        if found is None:
            whole = False
        else:
            texts[table], separators[table] = found
    pointed = with_decimal_points(texts, separators, dialect, faults)
    definition = None
    if package.definition is not None:
        definition = _definition(package.definition, package.tables, faults, nesting_max)
        whole = whole and definition is not None
    if pointed is None or not whole:
        places = Places(of_files=True, has_definition=package.definition is not None)
        return FilesRead(document=None, places=places, faults=faults)
    return _put_together(grids | pointed, definition, faults)


def _definition(
    file: TableFile, tables: Mapping[str, TableFile], faults: FaultList, nesting_max: int
) -> dict[str, object] | None:
    """Read the parts of a network that stand in its JSON file; None, with faults, if it is broken.

    A table that has a file of its own must not stand there too.
    """
    found = read_json(file.path.read_bytes(), nesting_max=nesting_max, tables=FLAT_FIELDS)
    for fault in (*found.unreadable, *found.invalid):
        place = f"{file.source}!{fault.pointer}" if fault.pointer else file.source
        faults.add(place, fault.code, fault.detail, fault.value)
    if found.unreadable or found.invalid:
        return None
    if not isinstance(found.value, dict):
        faults.add(file.source, "wrong_type", "Send a network definition: a JSON object.")
        return None
    for table in tables:
        held = [name for name in found.value if name in _ORDER]
        doubled = table in held or (table == "network" and len(held) < len(found.value))
        if doubled or (table == "packs" and "items" in held):
            detail = f"{DEFINITION_FILE} holds this table already. Send one of them."
            faults.add(tables[table].source, "duplicate_table", detail)
    return found.value


def _put_together(
    read: Mapping[str, Grid], definition: dict[str, object] | None, faults: FaultList
) -> FilesRead:
    """Return the tables as one definition, in the order in which a network has them."""
    grids = {name: with_values(grid) for name, grid in read.items()}
    given = definition or {}
    head = {name: value for name, value in given.items() if name not in _ORDER}
    if "network" in grids:
        head |= head_of(grids["network"], faults)
    parts: dict[str, object] = {}
    packs: dict[tuple[int, int], int] = {}
    for name in _ORDER:
        if name in given:
            parts[name] = given[name]
        if name not in grids:
            continue
        grid = grids[name]
        if name in _BIG:
            parts[name] = sheet_of_grid(grid, faults)
            grids[name] = grid.without_cells()
        elif name == "rules":
            parts[name] = rules_of_grid(grid, faults)
        elif name == "control":
            parts[name] = head_of(grid, faults)
        else:
            things = things_of(grid, faults)
            parts[name] = things
            if name == "items" and "packs" in grids:
                by_item, packs = pack_rows(grids["packs"], things, faults)
                for place, found in by_item.items():
                    things[place]["packs"] = found
    _add_missing(parts, faults)
    return FilesRead(
        document=head | parts,
        places=Places(
            grids=grids, packs=packs, of_files=True, has_definition=definition is not None
        ),
        faults=faults,
    )


def _add_missing(parts: dict[str, object], faults: FaultList) -> None:
    """Report each table that a network needs and that is not there, and go on without its rows."""
    for name in WANTED:
        if name != "network" and name not in parts:
            detail = f"A network needs {name}; send its header alone if it has no rows."
            faults.add(name, "missing_table", detail)
            parts[name] = []
