"""Executing a run: every way in which a child may end, and what becomes of the run."""

from collections.abc import Callable
from pathlib import Path

import orjson
import pytest

from service.network.canonical import canonical_json
from service.network.options import Options
from service.planning.outcome import FailureReason, Outcome
from service.runs.faults import ChildCrashed, ChildMemory, ChildReleased, ChildTimeout
from service.runs.read import Read
from service.runs.recover import Recover
from service.runs.run import Claim, Run, RunState
from service.store.audit import check_store
from service.store.database import Database
from service.store.sql_store import SqlStore
from tests.run_factories import FakePlanner, execution, outcome, sha256, submitted


@pytest.fixture
def run(store: SqlStore, tmp_path: Path) -> Run:
    """Return a run that waits."""
    return submitted(store, tmp_path / "in")


def raising(error: Exception) -> Callable[[Claim], object]:
    """Return what a planner does instead of planning."""

    def instead(_: Claim) -> object:
        raise error

    return instead


def kinds(store: SqlStore, run: Run) -> list[str]:
    """Return what happened to a run, in order."""
    with store.reading() as reading:
        return [event.kind for event in reading.events(f"run:{run.id}", run.tenant)]


def test_planned_run_has_its_plan_and_its_history(
    store: SqlStore,
    database: Database,
    run: Run,
    tmp_path: Path,
) -> None:
    """State, artefacts, search rows and event are there together."""
    planner = FakePlanner()

    state = execution(store, tmp_path / "scratch", planner)(run.id)

    read = Read(store=store)
    now = read.run(run.id, "local")
    plan = read.plan_bytes(run.id, "local")
    assert state is now.state is RunState.PLANNED
    assert (now.plan_digest, now.certificate_digest) == (sha256(plan), sha256(b'{"format":1}'))
    assert now.started_at is not None
    assert now.finished_at is not None
    assert run.created_at <= now.started_at <= now.finished_at
    assert kinds(store, run) == ["submitted", "claimed", "finished"]
    assert [line["lane"] for line in orjson.loads(plan)["plan_lines"]] == ["L0", "L1"]
    with database.engine.connect() as connection:
        lines = connection.exec_driver_sql("SELECT lane, quantity FROM plan_line ORDER BY position")
        assert [tuple(line) for line in lines] == [("L0", "4"), ("L1", "4")]
    assert check_store(database).problems == ()


def test_child_gets_files_and_the_options_as_they_were_digested(
    store: SqlStore,
    run: Run,
    tmp_path: Path,
) -> None:
    """A child has no way to the database; all it needs lies in its folder, and is gone after."""
    seen: dict[str, object] = {}

    class Looking(FakePlanner):
        def plan(self, claim: Claim, source: Path, options: Options, target: Path) -> Outcome:
            seen["files"] = sorted(path.name for path in source.iterdir())
            seen["network"] = sha256((source / "network.zip").read_bytes())
            seen["options"] = sha256(canonical_json(options.to_document()))
            seen["target"] = list(target.iterdir())
            return super().plan(claim, source, options, target)

    execution(store, tmp_path / "scratch", Looking())(run.id)

    with store.reading() as reading:
        submission = reading.submission(run.id, "local")
    assert seen == {
        "files": ["intake.json", "network.zip"],
        "network": submission.normal_digest,
        "options": submission.options_digest,
        "target": [],
    }
    assert list((tmp_path / "scratch").iterdir()) == []


@pytest.mark.parametrize(
    ("error", "reason"),
    [
        (ChildTimeout("ended"), FailureReason.TIME_LIMIT),
        (ChildMemory("ended"), FailureReason.MEMORY_LIMIT),
    ],
)
def test_child_that_was_ended_at_a_limit_fails_its_run_at_once(
    store: SqlStore,
    run: Run,
    tmp_path: Path,
    error: Exception,
    reason: FailureReason,
) -> None:
    """It would meet the same limit again; and a limit that was hit is never an answer."""
    state = execution(store, tmp_path, FakePlanner(instead=raising(error)))(run.id)

    now = Read(store=store).run(run.id, "local")
    assert (state, now.state, now.reason, now.crashes) == (
        RunState.FAILED,
        RunState.FAILED,
        reason,
        0,
    )
    assert now.detail


def test_third_crash_fails_the_run(store: SqlStore, run: Run, tmp_path: Path) -> None:
    """Twice may be an accident; a poisonous network must not hold the slot for ever."""
    execute = execution(store, tmp_path, FakePlanner(instead=raising(ChildCrashed("signal 11"))))

    states = [execute(run.id) for _ in range(4)]

    now = Read(store=store).run(run.id, "local")
    assert states == [RunState.WAITING, RunState.WAITING, RunState.FAILED, None]
    assert (now.reason, now.crashes, now.attempt) == (FailureReason.SOLVER_CRASHED, 3, 3)
    assert "signal 11" in str(now.detail)
    assert kinds(store, run) == [
        "submitted",
        *(["claimed", "given_back"] * 2),
        "claimed",
        "finished",
    ]


def test_attempts_without_a_crash_are_never_counted_out(
    store: SqlStore,
    database: Database,
    run: Run,
    tmp_path: Path,
) -> None:
    """A service that is restarted ten times says nothing about the run."""
    execute = execution(store, tmp_path, FakePlanner(instead=raising(ChildReleased("drain"))))

    states = [execute(run.id) for _ in range(10)]
    last = execution(store, tmp_path)(run.id)

    now = Read(store=store).run(run.id, "local")
    assert states == [RunState.WAITING] * 10
    assert last is RunState.PLANNED
    assert (now.attempt, now.crashes) == (11, 0)
    assert check_store(database).problems == ()


@pytest.mark.parametrize(
    "ended",
    [
        outcome("failed", reason=FailureReason.NUMBERS_TOO_LARGE, detail="the cost of L1"),
        outcome("failed", reason=FailureReason.PROOF_FAILED, detail="a lane is too cheap"),
        outcome("failed", reason=FailureReason.INTERNAL, detail="see the log"),
        outcome("no_plan"),
    ],
    ids=lambda ended: ended.reason or ended.state,
)
def test_answers_that_are_no_plan_are_stored_like_one(
    store: SqlStore,
    database: Database,
    run: Run,
    tmp_path: Path,
    ended: Outcome,
) -> None:
    """They are answers, not exceptions; a plan that failed its proof is kept, not searched."""
    execution(store, tmp_path, FakePlanner(outcome=ended))(run.id)

    now = Read(store=store).run(run.id, "local")
    with database.engine.connect() as connection:
        rows = connection.exec_driver_sql("SELECT count(*) FROM plan_line").scalar()
    assert (now.state, now.reason, now.detail) == (ended.state, ended.reason, ended.detail)
    kept = ended.state == "no_plan" or ended.reason == "proof_failed"
    assert (now.plan_digest is not None, now.certificate_digest is not None) == (kept, kept)
    assert rows == (2 if ended.state == "no_plan" else 0)
    assert check_store(database).problems == ()


def test_plan_without_its_artefacts_is_no_plan(store: SqlStore, run: Run, tmp_path: Path) -> None:
    """A child that says "planned" and leaves nothing behind has planned nothing."""

    class Forgetful(FakePlanner):
        def plan(self, claim: Claim, source: Path, options: Options, target: Path) -> Outcome:
            answer = super().plan(claim, source, options, target)
            (target / "certificate.json").unlink()
            return answer

    execution(store, tmp_path, Forgetful())(run.id)

    now = Read(store=store).run(run.id, "local")
    assert (now.state, now.reason) == (RunState.FAILED, FailureReason.INTERNAL)


def test_mistake_of_ours_fails_the_run_and_is_raised(
    store: SqlStore,
    run: Run,
    tmp_path: Path,
) -> None:
    """The supervisor logs it; the run must not hang until its lease is over, to meet it again."""
    execute = execution(
        store, tmp_path, FakePlanner(instead=raising(RuntimeError("lane L1 is odd")))
    )

    with pytest.raises(RuntimeError, match="lane L1"):
        execute(run.id)

    now = Read(store=store).run(run.id, "local")
    assert (now.state, now.reason) == (RunState.FAILED, FailureReason.INTERNAL)
    assert "L1" not in str(now.detail)


def test_holder_that_lost_its_claim_stores_nothing(
    store: SqlStore,
    database: Database,
    run: Run,
    tmp_path: Path,
) -> None:
    """Meanwhile somebody else took the run over, and finished it with another plan."""

    def overtaken(claim: Claim) -> object:
        Recover(store=store)()
        planner = FakePlanner(lines=5)
        return execution(store, tmp_path / "other", planner)(claim.run_id)

    state = execution(store, tmp_path / "first", FakePlanner(instead=overtaken))(run.id)

    now = Read(store=store).run(run.id, "local")
    with database.engine.connect() as connection:
        rows = connection.exec_driver_sql("SELECT count(*) FROM plan_line").scalar()
    assert state is None
    assert (now.state, now.attempt, rows) == (RunState.PLANNED, 2, 5)
    assert kinds(store, run)[-1] == "finished"
    assert kinds(store, run).count("finished") == 1
    assert check_store(database).problems == ()


def test_unknown_or_finished_run_is_left_alone(store: SqlStore, run: Run, tmp_path: Path) -> None:
    """A wake-up may come twice, or late."""
    execute = execution(store, tmp_path)
    execute(run.id)

    assert execute(run.id) is None
    assert Read(store=store).run(run.id, "local").attempt == 1


def test_submission_that_cannot_be_read_fails_the_run(
    store: SqlStore,
    database: Database,
    run: Run,
    tmp_path: Path,
) -> None:
    """A broken blob is broken for good: it must not be tried over and over."""
    with store.reading() as reading:
        digest = reading.submission(run.id, "local").normal_digest
    with database.engine.begin() as connection:
        if database.is_sqlite:
            connection.exec_driver_sql("DROP TRIGGER blob_refuse_delete")
        else:
            connection.exec_driver_sql("DROP TRIGGER blob_refuse ON blob")
        connection.exec_driver_sql(f"DELETE FROM blob WHERE digest = '{digest}'")  # noqa: S608 - our own

    execution(store, tmp_path)(run.id)

    now = Read(store=store).run(run.id, "local")
    assert (now.state, now.reason) == (RunState.FAILED, FailureReason.INTERNAL)
    assert "cannot be read" in str(now.detail)
