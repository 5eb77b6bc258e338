"""Warm starts: the newest of the same network, else of one like it; never in the way of a run."""

import os
from dataclasses import replace
from pathlib import Path

import pytest

from service.planning.outcome import FailureReason, State
from service.runs.faults import ChildCrashed
from service.runs.run import LOCAL, Run, RunState
from service.store.audit import check_store
from service.store.database import Database
from service.store.sql_store import SqlStore
from tests.databases import FakeClock
from tests.run_factories import FakePlanner, execution, outcome, submitted

LIKE = "sha-256:" + "1" * 64
UNLIKE = "sha-256:" + "2" * 64


class House:
    """A store in which runs are planned one after the other."""

    def __init__(self, store: SqlStore, clock: FakeClock, folder: Path) -> None:
        """Plan in ``store``."""
        self.store, self._clock, self._folder = store, clock, folder
        self._count = 0

    def submit(self, *, body: bytes = b"1", likeness: str = LIKE, tenant: str = "local") -> Run:
        """Submit a run whose network is ``body``."""
        self._count += 1
        self._clock.advance(1)  # ids sort by time
        actor = replace(LOCAL, tenant=tenant)
        folder = self._folder / f"in-{self._count}"
        return submitted(self.store, folder, body=body, likeness=likeness, actor=actor)

    def plan(self, run: Run, leaving: bytes | None = None, **planner: object) -> bytes | None:
        """Plan ``run``, ``leaving`` something for the next; return what it started from."""
        fake = FakePlanner(warm_start=leaving, **planner)  # type: ignore[arg-type] # see the calls
        execution(self.store, self._folder / "scratch", fake)(run.id)
        return fake.started_from[-1]


@pytest.fixture
def house(store: SqlStore, clock: FakeClock, tmp_path: Path) -> House:
    """Return a house on a fresh database."""
    return House(store, clock, tmp_path)


def kept(database: Database) -> int:
    """Return how many warm starts there are."""
    with database.engine.connect() as connection:
        return int(connection.exec_driver_sql("SELECT count(*) FROM warm_start").scalar_one())


def damage(database: Database, assignment: str) -> None:
    """Change all warm starts."""
    with database.engine.begin() as connection:
        connection.exec_driver_sql(f"UPDATE warm_start SET {assignment}")  # noqa: S608 - our own


def test_next_run_of_the_same_network_starts_where_the_newest_ended(house: House) -> None:
    """Cold first; then from the newest, also where a newer run of a network like it exists."""
    first = house.plan(house.submit(), b"first")
    second = house.plan(house.submit(), b"second")
    house.plan(house.submit(body=b"2"), b"like it")

    third = house.plan(house.submit(), b"third")

    assert (first, second, third) == (None, b"first", b"second")


def test_network_never_seen_starts_from_the_newest_one_like_it(house: House) -> None:
    """Tonight's network differs from yesterday's in its orders, hardly in its prices."""
    house.plan(house.submit(body=b"1"), b"older")
    house.plan(house.submit(body=b"2"), b"newer")
    house.plan(house.submit(body=b"3", likeness=UNLIKE), b"unlike")

    assert house.plan(house.submit(body=b"4")) == b"newer"


def test_other_tenants_prices_are_out_of_reach(house: House) -> None:
    """Prices tell about stock and costs, and those are nobody else's business."""
    house.plan(house.submit(tenant="north"), b"secret")

    assert house.plan(house.submit(tenant="south")) is None
    assert house.plan(house.submit(tenant="north")) == b"secret"


@pytest.mark.parametrize(
    ("state", "reason"),
    [
        ("no_plan", None),
        ("failed", FailureReason.NUMBERS_TOO_LARGE),
        ("failed", FailureReason.PROOF_FAILED),
    ],
)
def test_only_a_planned_run_leaves_something(
    house: House, database: Database, state: State, reason: FailureReason | None
) -> None:
    """What led to no plan, or to a wrong one, is nothing to start from."""
    house.plan(house.submit(), b"doubtful", outcome=outcome(state, reason=reason))

    assert kept(database) == 0


def test_run_whose_child_crashed_is_started_cold(house: House) -> None:
    """If the warm start was what killed it, the second try is rid of it."""
    house.plan(house.submit(), b"poison")
    run = house.submit()

    def die(_: object) -> None:
        raise ChildCrashed("died")

    poisoned = house.plan(run, instead=die)
    again = house.plan(run)

    assert (poisoned, again) == (b"poison", None)


@pytest.mark.parametrize(
    "assignment",
    [
        "bytes = 'no bytes at all'",
        "digest = 'sha-256:0'",
        "bytes = (SELECT bytes FROM blob LIMIT 1)",
    ],
)
def test_damaged_warm_start_is_as_good_as_none(
    house: House, database: Database, assignment: str
) -> None:
    """The run is planned from nothing, and what it leaves takes the place of the damage."""
    house.plan(house.submit(), b"prices")
    damage(database, assignment)

    run = house.submit()
    cold = house.plan(run, b"prices again")

    assert cold is None
    with house.store.reading() as reading:
        assert reading.run(run.id, "local").state is RunState.PLANNED
    assert house.plan(house.submit()) == b"prices again"
    assert check_store(database).verdict == "intact"


def test_lost_table_fails_no_run(house: House, database: Database) -> None:
    """A service whose role was not given the rights to it plans all the same."""
    house.plan(house.submit(), b"prices")
    with database.engine.begin() as connection:
        connection.exec_driver_sql("ALTER TABLE warm_start RENAME TO elsewhere")

    run = house.submit()

    assert house.plan(run, b"more") is None
    with house.store.reading() as reading:
        assert reading.run(run.id, "local").state is RunState.PLANNED


def test_oldest_are_dropped_beyond_the_limit(
    database: Database, clock: FakeClock, tmp_path: Path
) -> None:
    """Three of 1000 bytes that do not shrink, and room for two: the first is gone."""
    house = House(SqlStore(database, clock, warm_start_bytes_max=2500), clock, tmp_path)
    contents = [os.urandom(1000) for _ in range(3)]
    for number, content in enumerate(contents):
        house.plan(house.submit(body=f"{number}".encode(), likeness=f"{LIKE}-{number}"), content)

    found = [
        house.store.warm_start("local", network_digest="none", likeness=f"{LIKE}-{number}")
        for number in range(3)
    ]

    assert found == [None, contents[1], contents[2]]


def test_nothing_is_kept_where_the_setting_says_so(
    database: Database, clock: FakeClock, tmp_path: Path
) -> None:
    """An operator who wants no cache has none."""
    house = House(SqlStore(database, clock, warm_start_bytes_max=0), clock, tmp_path)

    house.plan(house.submit(), b"prices")

    assert kept(database) == 0
    assert house.plan(house.submit()) is None


def test_mistaken_giant_is_not_kept(
    house: House, database: Database, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A file larger than any warm start is one of another kind."""
    monkeypatch.setattr("service.runs.execute.WARM_START_BYTES_MAX", 5)

    house.plan(house.submit(), b"six by")

    assert kept(database) == 0


def test_one_is_kept_of_each_network(house: House, database: Database) -> None:
    """The newest makes the others of its network useless."""
    for _ in range(3):
        house.plan(house.submit(), b"prices")
    house.plan(house.submit(body=b"2"), b"prices")

    assert kept(database) == 2
