"""The engine under test, over each database."""

from collections.abc import Iterator
from pathlib import Path

import pytest

from service.engine.lock import EngineLock
from service.store.database import Database
from service.store.sql_store import SqlStore, SystemClock
from tests.engine.houses import House, engine_over


@pytest.fixture
def house(database: Database, tmp_path: Path) -> Iterator[House]:
    """Start an engine over a fresh store."""
    store = SqlStore(database, SystemClock())
    engine, planner = engine_over(store, tmp_path / "scratch")
    engine.start(EngineLock(tmp_path / "lanewright.db.engine"))
    yield House(store=store, engine=engine, planner=planner, folder=tmp_path)
    engine.stop()


@pytest.fixture
def idle_house(database: Database, tmp_path: Path) -> Iterator[House]:
    """Return a house whose engine does nothing by itself."""
    store = SqlStore(database, SystemClock())
    engine, planner = engine_over(store, tmp_path / "scratch")
    yield House(store=store, engine=engine, planner=planner, folder=tmp_path)
    planner.close()
