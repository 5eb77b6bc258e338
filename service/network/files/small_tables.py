"""Head, items, sites, rules and control totals of files as the parts of a definition in JSON."""

from collections.abc import Mapping, Sequence
from typing import Final

from service.network.faults import FaultList, Odd
from service.network.files.grids import Grid, add_at_rows
from service.network.files.table_columns import PICKS_ALL

_SELECTORS: Final = ("lanes", "sites", "items")


def head_of(grid: Grid, faults: FaultList) -> dict[str, object]:
    """Return the one row of ``network`` or ``control`` as an object of fields.

    Control totals may be left unsaid, with nothing beneath their header.
    """
    if grid.rows != 1 and (grid.rows or grid.table != "control"):
        detail = f"{grid.table} has one row beneath its header; this has {grid.rows}."
        faults.add(grid.source, "wrong_row_count", detail)
    return _row(grid, 0, faults) if grid.rows else {}


def things_of(grid: Grid, faults: FaultList) -> list[dict[str, object]]:
    """Return the rows of items or sites as objects."""
    things = [_row(grid, row, faults) for row in range(grid.rows)]
    by_item = [name for name in grid.columns if name.startswith("handling_cost.")]
    for row, thing in enumerate(things):
        costs = {
            name.partition(".")[2]: grid.columns[name].at(row)
            for name in by_item
            if grid.columns[name].at(row) is not None
        }
        if costs and "handling_cost" in thing:
            detail = "Say one handling cost for every item, or one for each, not both."
            add_at_rows(faults, grid, [row], "handling_cost", ("said_twice", detail))
        elif costs:
            strange = [cost for cost in costs.values() if isinstance(cost, Odd)]
            thing["handling_cost"] = strange[0] if strange else costs
    return things


def pack_rows(
    grid: Grid, items: Sequence[Mapping[str, object]], faults: FaultList
) -> tuple[dict[int, list[dict[str, object]]], dict[tuple[int, int], int]]:
    """Return the packs of each item by its position, and the row of each of them.

    A pack of an item that is not there is a fault.
    """
    positions = {thing.get("id"): place for place, thing in reversed(list(enumerate(items)))}
    packs: dict[int, list[dict[str, object]]] = {}
    rows: dict[tuple[int, int], int] = {}
    if grid.rows and "item" not in grid.columns and "item" not in grid.refused:
        detail = "Every row of packs needs item."
        faults.add(grid.place(column="item"), "missing_field", detail)
        return packs, rows
    for row in range(grid.rows):
        found = _row(grid, row, faults)
        item = found.pop("item", None)
        if item is None and "item" in grid.columns:
            add_at_rows(faults, grid, [row], "item", ("missing_field", "'item' is needed here."))
        elif isinstance(item, Odd):
            add_at_rows(faults, grid, [row], "item", (item.code, item.detail))
        elif item in positions:
            place = positions[item]
            rows[place, len(packs.setdefault(place, []))] = row
            packs[place].append(found)
        elif "item" in grid.columns:
            detail = "There is no item of this id. Add it to the network, or correct the id."
            add_at_rows(faults, grid, [row], "item", ("unknown_item", detail))
    return packs, rows


def rules_of_grid(grid: Grid, faults: FaultList) -> list[dict[str, object]]:
    """Return the rows of rules as objects with their selectors."""
    rules = []
    for row in range(grid.rows):
        rule: dict[str, object] = {}
        parts: dict[str, dict[str, object]] = {}
        for name, value in _row(grid, row, faults).items():
            selector, point, key = name.partition(".")
            if point:
                parts.setdefault(selector, {})[key] = value
            elif name in _SELECTORS:
                parts.setdefault(name, {})
                if value != PICKS_ALL:
                    detail = f"Say {PICKS_ALL}, or pick by the columns {name}.ids and so on."
                    add_at_rows(faults, grid, [row], name, ("bad_choice", detail))
            else:
                rule[name] = value
        for name, picks in parts.items():
            if picks and name in grid.columns and grid.columns[name].at(row) is not None:
                detail = f"This row picks by columns too. Say {PICKS_ALL}, or pick."
                add_at_rows(faults, grid, [row], name, ("said_twice", detail))
        rules.append(rule | parts)
    return rules


def _row(grid: Grid, row: int, faults: FaultList) -> dict[str, object]:
    """Return what a row says, its ``extra`` columns as one object; other families are left."""
    found: dict[str, object] = {}
    extra: dict[str, object] = {}
    for name, cells in grid.columns.items():
        value = cells.at(row)
        family, point, rest = name.partition(".")
        if value is None or (family == "handling_cost" and point):
            continue
        if family == "extra" and point:
            extra[rest] = value
        else:
            found[name] = value
    if not extra:
        return found
    given = found.get("extra", {})
    strange = [value for value in (given, *extra.values()) if isinstance(value, Odd)]
    if strange:
        return found | {"extra": strange[0]}
    assert isinstance(given, dict)  # noqa: S101 - pairs or odd
    for name in sorted(set(given) & set(extra)):
        detail = "This pair stands in the column extra too. Keep one of them."
        add_at_rows(faults, grid, [row], f"extra.{name}", ("duplicate_name", detail))
    return found | {"extra": extra | given}
