"""A definition in JSON as tables of files and sheets: the way back from ``definition_files``."""

import json
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from service.network.files.table_columns import LIST_SEPARATOR, PICKS_ALL, TABLES

_SELECTORS = ("lanes", "sites", "items")


@dataclass(frozen=True, slots=True, kw_only=True)
class FlatTable:
    """A table of texts: its columns, and a cell for each in every row, None where it is empty."""

    columns: tuple[str, ...]
    rows: tuple[tuple[str | None, ...], ...]


def flat_tables(document: Mapping[str, Any]) -> dict[str, FlatTable]:
    """Return the tables of a definition whose big tables are rows; those without rows are kept.

    A column that no row fills is left out unless every row needs it.
    """
    head = {name: value for name, value in document.items() if name in TABLES["network"]}
    items = [dict(item) for item in document["items"]]
    packs = [
        {"item": item["id"], **pack} for item in items for pack in (item.pop("packs", None) or ())
    ]
    rows: dict[str, Iterable[Mapping[str, Any]]] = {
        "network": [head],
        "items": items,
        "packs": packs,
        "rules": document.get("rules") or (),
        "exchange_rates": document.get("exchange_rates") or (),
        "tariffs": document.get("tariffs") or (),
        "storage": document.get("storage") or (),
        "control": [document["control"]] if document.get("control") else (),
    }
    rows |= {name: document[name] for name in ("sites", "supply", "demand", "lanes")}
    return {name: _table(name, map(_flat, rows[name])) for name in TABLES}


def _table(name: str, rows: Iterable[Mapping[str, str]]) -> FlatTable:
    """Return rows of named cells as a table; columns in the order in which they are explained."""
    cells = list(rows)
    used = {column: None for row in cells for column in row}
    # Lanes have a cost where they have no tariff.
    cost = () if name != "lanes" or "tariff" in used else ("unit_cost",)
    fields = TABLES[name].items()
    known = [name for name, field in fields if field.needed or name in used or name in cost]
    columns = (*known, *(column for column in used if column not in TABLES[name]))
    return FlatTable(
        columns=columns,
        rows=tuple(tuple(row.get(column) for column in columns) for row in cells),
    )


def _flat(row: Mapping[str, Any]) -> dict[str, str]:
    """Return one object as cells by column; what is absent has none."""
    cells: dict[str, str] = {}
    for name, value in row.items():
        if isinstance(value, Mapping):
            if name in _SELECTORS and not value:
                cells[name] = PICKS_ALL
            elif name == "extra":
                cells |= _pairs(value)
            else:
                cells |= {f"{name}.{key}": cell for key, cell in _flat(value).items()}
        elif isinstance(value, Sequence) and not isinstance(value, str):
            if value:
                cells[name] = _list(value)
        elif isinstance(value, bool):
            cells[name] = str(value).lower()
        elif value is not None:
            cells[name] = str(value)
    return cells


def _list(texts: Sequence[Any]) -> str:
    """Return texts, or objects, as one cell."""
    if not isinstance(texts[0], str):
        return json.dumps(texts, ensure_ascii=False)
    if any(LIST_SEPARATOR in text or text.startswith("[") or not text for text in texts):
        return json.dumps(list(texts), ensure_ascii=False)
    return LIST_SEPARATOR.join(texts)


def _pairs(pairs: Mapping[str, str]) -> dict[str, str]:
    """Return pairs as columns; an empty text, which no cell can say, goes into an object."""
    empty = {name: text for name, text in pairs.items() if not text}
    cells = {f"extra.{name}": text for name, text in pairs.items() if text}
    return cells | ({"extra": json.dumps(empty, ensure_ascii=False)} if empty else {})
