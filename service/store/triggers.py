"""The triggers that keep facts as they were written, and the dispatch row to its legal moves.

A migration creates them; here is what must be there, compared at start and after every migration,
because rebuilding an SQLite table drops its triggers without a word.
"""

from collections.abc import Iterable
from typing import Final

from sqlalchemy import Connection, text

from service.store.tables import DISPATCH_TABLE, FACT_TABLES
from service.store.trigger_texts import (
    POSTGRESQL_FUNCTIONS,
    postgresql_triggers,
    sqlite_triggers,
)

_FUNCTIONS_HERE: Final = text(
    "SELECT p.proname AS name, p.prosrc AS body FROM pg_proc p"
    " JOIN pg_namespace n ON n.oid = p.pronamespace"
    " WHERE n.nspname = current_schema() AND p.proname LIKE 'lanewright%' ORDER BY p.proname",
)
_TRIGGERS_HERE: Final = text(
    "SELECT c.relname AS place, t.tgname AS name, t.tgenabled AS enabled,"
    " pg_get_triggerdef(t.oid, true) AS form"
    " FROM pg_trigger t JOIN pg_class c ON c.oid = t.tgrelid"
    " JOIN pg_namespace n ON n.oid = c.relnamespace"
    " WHERE n.nspname = current_schema() AND NOT t.tgisinternal ORDER BY c.relname, t.tgname",
)
_SQLITE_TRIGGERS_HERE: Final = text(
    "SELECT tbl_name AS place, name, sql AS form FROM sqlite_master WHERE type = 'trigger'"
    " ORDER BY tbl_name, name",
)


def trigger_faults(connection: Connection) -> list[str]:
    """Return, in words, every trigger that is missing, changed, switched off or one too many.

    Triggers on tables that this release does not know are left alone: a later release may have
    migrated the database while this one still runs.
    """
    if connection.dialect.name == "sqlite":
        expected = {(table, name): form for table, name, form in sqlite_triggers()}
        rows = connection.execute(_SQLITE_TRIGGERS_HERE)
        found = {(row.place, row.name): row.form for row in rows}
        return _differences(expected, found)
    faults = _function_faults(connection)
    expected = {(table, name): form for table, name, form in postgresql_triggers()}
    found = {}
    for row in connection.execute(_TRIGGERS_HERE):
        found[row.place, row.name] = row.form
        # A: always, also where a session asks to be treated as a replica.
        if (row.place, row.name) in expected and row.enabled not in {"A", b"A"}:
            faults.append(f"trigger {row.name} on {row.place} is switched off")
    return faults + _differences(expected, found)


def _function_faults(connection: Connection) -> list[str]:
    found = {row.name: row.body for row in connection.execute(_FUNCTIONS_HERE)}
    return [
        f"function {name} is {'changed' if name in found else 'missing'}"
        for name, body in sorted(POSTGRESQL_FUNCTIONS.items())
        if found.get(name) != body
    ]


def _differences(
    expected: dict[tuple[str, str], str],
    found: dict[tuple[str, str], str],
) -> list[str]:
    faults = [
        f"trigger {name} on {table} is {'changed' if (table, name) in found else 'missing'}"
        for (table, name), form in sorted(expected.items())
        if _plain(found.get((table, name), "")) != _plain(form)
    ]
    known = {*FACT_TABLES, DISPATCH_TABLE}
    return faults + [
        f"trigger {name} on {table} is one that nobody knows"
        for table, name in _sorted(found.keys() - expected.keys())
        if table in known
    ]


def _sorted(keys: Iterable[tuple[str, str]]) -> list[tuple[str, str]]:
    return sorted(keys)


def _plain(form: str) -> str:
    return " ".join(form.split())
