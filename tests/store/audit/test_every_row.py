"""The audit finds tampering with every kind of row, on both databases, and names the place.

Whoever tampers here owns the database: triggers are gone and foreign keys are off. What the audit
says of the triggers themselves is left aside, so that it has to find the row.
"""

import pytest
from sqlalchemy import Engine
from sqlalchemy.exc import IntegrityError

from service.store.database import Database
from service.store.tables import Base
from tests.store.audit.tampering import (
    HELD_BY_A_CHECK,
    TABLES,
    UNRECORDED,
    at,
    found,
    names,
    other,
    rows_of,
    some,
)


@pytest.mark.parametrize("name", TABLES)
def test_change_of_any_column_of_any_row_is_found(
    database: Database,
    unguarded: Engine,
    name: str,
    request: pytest.FixtureRequest,
) -> None:
    """Every value that is stored is covered by a hash, or compared with one that is."""
    table = Base.metadata.tables[name]
    tampered: set[str] = set()
    for row in some(rows_of(unguarded, table), long=request.config.getoption("--long")):
        for column in table.columns:
            after = other(row[column.name])
            if after is None or (name, column.name) in UNRECORDED:
                continue
            try:
                with unguarded.begin() as connection:
                    change = table.update().where(at(table, row)).values({column.name: after})
                    connection.execute(change)
            except IntegrityError:
                continue  # a CHECK or a key, which stand however many triggers are gone
            tampered.add(column.name)

            problems = found(database)

            said = " ".join(problem.place + problem.detail for problem in problems)
            assert any(name in said for name in names(row, after)), (column.name, row, problems)
            with unguarded.begin() as connection:
                back = table.update().where(at(table, {**row, column.name: after}))
                connection.execute(back.values({column.name: row[column.name]}))
        assert found(database) == []

    optional = {column.name for column in table.columns if column.nullable}
    left_aside = {column for of, column in UNRECORDED | HELD_BY_A_CHECK if of == name}
    assert set(table.columns.keys()) - optional - left_aside <= tampered


@pytest.mark.parametrize("name", TABLES)
def test_every_row_that_is_taken_away_is_missed(
    database: Database,
    unguarded: Engine,
    name: str,
    request: pytest.FixtureRequest,
) -> None:
    """Also the last one of a chain, which no later event would betray."""
    table = Base.metadata.tables[name]
    unmissed = []
    for row in some(rows_of(unguarded, table), long=request.config.getoption("--long")):
        with unguarded.begin() as connection:
            connection.execute(table.delete().where(at(table, row)))

        if not found(database):
            unmissed.append(row)

        with unguarded.begin() as connection:
            connection.execute(table.insert().values(row))

    assert unmissed == []
    assert found(database) == []


@pytest.mark.parametrize("name", TABLES)
def test_row_that_is_put_in_is_found(database: Database, unguarded: Engine, name: str) -> None:
    """A copy of a row under a key of its own, as somebody would slip it in."""
    table = Base.metadata.tables[name]
    copy = dict(rows_of(unguarded, table)[-1])
    for column in ("digest", "id", "run", "stream"):
        if column in copy:
            copy[column] = other(copy[column])
    copy |= {"number": 9} if "number" in copy else {}
    copy |= {"token": None} if "token" in copy else {}
    with unguarded.begin() as connection:
        connection.execute(table.insert().values(copy))

    assert found(database) != []
