"""What the triggers say, for both databases."""

from collections.abc import Iterator
from typing import Final

from service.runs.lifecycle import FINAL, may_move
from service.runs.run import RunState
from service.store.tables import DISPATCH_TABLE, FACT_TABLES

_APPEND_ONLY: Final = "lanewright: facts are append-only"
_ONLY_MOVES: Final = "lanewright: no legal move of a run"


def _legal_moves() -> str:
    """Return a condition over OLD and NEW that is true for a legal move."""
    moves = sorted(
        (source.value, target.value)
        for source in RunState
        for target in RunState
        if source not in FINAL and may_move(source, target)
    )
    pairs = ", ".join(f"'{source}>{target}'" for source, target in moves)
    return (
        "NEW.tenant = OLD.tenant AND NEW.run = OLD.run AND NEW.deadline_at = OLD.deadline_at"
        " AND NEW.attempt >= OLD.attempt AND NEW.crashes >= OLD.crashes"
        f" AND OLD.state || '>' || NEW.state IN ({pairs})"
    )


LEGAL_MOVES: Final = _legal_moves()

POSTGRESQL_FUNCTIONS: Final = {
    "lanewright_refuse": (
        f" BEGIN RAISE EXCEPTION '{_APPEND_ONLY}: % on %', TG_OP, TG_TABLE_NAME"
        " USING ERRCODE = 'restrict_violation'; END "
    ),
    "lanewright_dispatch": (
        f" BEGIN IF {LEGAL_MOVES} THEN RETURN NEW; END IF;"
        f" RAISE EXCEPTION '{_ONLY_MOVES}: % to %', OLD.state, NEW.state"
        " USING ERRCODE = 'restrict_violation'; END "
    ),
}


def postgresql_triggers() -> Iterator[tuple[str, str, str]]:
    """Yield (table, name, statement as PostgreSQL itself writes it)."""
    for table in FACT_TABLES:
        yield (
            table,
            f"{table}_refuse",
            (
                f"CREATE TRIGGER {table}_refuse BEFORE DELETE OR UPDATE OR TRUNCATE ON {table}"
                " FOR EACH STATEMENT EXECUTE FUNCTION lanewright_refuse()"
            ),
        )
    yield (
        DISPATCH_TABLE,
        f"{DISPATCH_TABLE}_move",
        (
            f"CREATE TRIGGER {DISPATCH_TABLE}_move BEFORE UPDATE ON {DISPATCH_TABLE}"
            " FOR EACH ROW EXECUTE FUNCTION lanewright_dispatch()"
        ),
    )
    yield (
        DISPATCH_TABLE,
        f"{DISPATCH_TABLE}_refuse",
        (
            f"CREATE TRIGGER {DISPATCH_TABLE}_refuse BEFORE DELETE OR TRUNCATE ON {DISPATCH_TABLE}"
            " FOR EACH STATEMENT EXECUTE FUNCTION lanewright_refuse()"
        ),
    )


def sqlite_triggers() -> Iterator[tuple[str, str, str]]:
    """Yield (table, name, statement)."""
    for table in FACT_TABLES:
        for verb in ("delete", "update"):
            yield table, f"{table}_refuse_{verb}", _sqlite_refusal(table, verb)
    yield (
        DISPATCH_TABLE,
        f"{DISPATCH_TABLE}_refuse_delete",
        _sqlite_refusal(DISPATCH_TABLE, "delete"),
    )
    yield (
        DISPATCH_TABLE,
        f"{DISPATCH_TABLE}_move",
        (
            f"CREATE TRIGGER {DISPATCH_TABLE}_move BEFORE UPDATE ON {DISPATCH_TABLE}"
            f" WHEN NOT ({LEGAL_MOVES}) BEGIN SELECT RAISE(ABORT, '{_ONLY_MOVES}'); END"
        ),
    )


def _sqlite_refusal(table: str, verb: str) -> str:
    return (
        f"CREATE TRIGGER {table}_refuse_{verb} BEFORE {verb.upper()} ON {table}"
        f" BEGIN SELECT RAISE(ABORT, '{_APPEND_ONLY}: {verb} on {table}'); END"
    )
