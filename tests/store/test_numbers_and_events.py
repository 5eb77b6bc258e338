"""Run numbers without gaps and chains without forks, however many write at once."""

import threading
from datetime import date
from pathlib import Path

import pytest
from sqlalchemy import text

from service.runs.events import chain_faults, event_document
from service.runs.run import LOCAL, Actor
from service.store.audit import check_store
from service.store.database import Database
from service.store.sql_store import SqlStore
from tests.run_factories import submitted

THREADS = 8
OTHER = Actor(tenant="other", name="someone", authentication="key")


def test_numbers_have_no_gap_under_concurrency(
    store: SqlStore,
    database: Database,
    tmp_path: Path,
) -> None:
    """Eight doors submit at once for two dates; an auditor counts 1, 2, 3 for each."""
    faults: list[Exception] = []

    def submit_three(name: int) -> None:
        try:
            for turn in range(3):
                plan_for = f"2026-02-0{3 + turn % 2}"
                submitted(store, tmp_path / f"{name}-{turn}", plan_for=plan_for)
        except Exception as error:  # noqa: BLE001 - a thread's fault must reach the test
            faults.append(error)

    threads = [threading.Thread(target=submit_three, args=(name,)) for name in range(THREADS)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(60)

    with database.engine.connect() as connection:
        rows = connection.execute(
            text("SELECT plan_for, number FROM run ORDER BY plan_for, number"),
        ).all()
    assert faults == []
    assert [(str(row.plan_for), row.number) for row in rows] == [
        *(("2026-02-03", number) for number in range(1, 17)),
        *(("2026-02-04", number) for number in range(1, 9)),
    ]
    assert check_store(database).problems == ()


def test_number_that_was_not_used_is_drawn_again(store: SqlStore, tmp_path: Path) -> None:
    """A submission that fails half-way must leave no hole behind."""
    with pytest.raises(KeyError), store.transaction() as transaction:  # noqa: PT012 - the raise is the test
        assert transaction.next_number("local", date(2026, 2, 3)) == 1
        raise KeyError

    run = submitted(store, tmp_path / "in")

    assert run.number == "2026-02-03/1"


def test_each_tenant_counts_for_itself(store: SqlStore, tmp_path: Path) -> None:
    """A number must not tell one tenant how busy another is."""
    numbers = [
        submitted(store, tmp_path / str(turn), actor=actor).number
        for turn, actor in enumerate((LOCAL, OTHER, LOCAL, OTHER))
    ]

    assert numbers == ["2026-02-03/1", "2026-02-03/1", "2026-02-03/2", "2026-02-03/2"]


def test_chain_has_no_fork_under_concurrency(store: SqlStore, database: Database) -> None:
    """Eight writers of one stream wait for each other; none is refused, nothing is lost."""
    faults: list[Exception] = []

    def append_five(name: int) -> None:
        try:
            for turn in range(5):
                with store.transaction() as transaction:
                    transaction.append("access", "read", LOCAL, {"who": name, "turn": turn})
        except Exception as error:  # noqa: BLE001 - a thread's fault must reach the test
            faults.append(error)

    threads = [threading.Thread(target=append_five, args=(name,)) for name in range(THREADS)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(60)

    with store.reading() as reading:
        events = reading.events("access", "local")
    assert faults == []
    assert [event.seq for event in events] == list(range(1, 41))
    assert chain_faults(events) == []
    assert check_store(database).verdict == "intact"


def test_event_comes_back_as_it_was_hashed(store: SqlStore) -> None:
    """Text of every kind, nothing at all, and numbers up to what JSON can carry exactly."""
    payload = {"text": 'é "\\\u0000😀', "none": None, "most": 2**53 - 1, "list": [True, {"b": "1"}]}

    with store.transaction() as transaction:
        written = transaction.append("access", "read", LOCAL, payload)
        empty = transaction.append("access", "read", OTHER, None)

    with store.reading() as reading:
        assert reading.events("access", "local") == [written]
        assert reading.events("access", "other") == [empty]
    assert (empty.seq, empty.payload_digest, empty.salt) == (1, None, None)
    assert event_document(written)["payload"] == payload
