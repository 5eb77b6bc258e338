"""Submitting: what is returned is on disk, and what does not fit together is not."""

from pathlib import Path

import orjson
import pytest

from service.network.canonical import canonical_json
from service.network.options import Options
from service.planning.memory import estimated_peak_bytes
from service.runs.faults import PlanTooLarge, RunUnknown
from service.runs.run import LOCAL, Actor, Run, RunId, RunState
from service.runs.submit import IntakeBroken, Submit
from service.store.database import Database
from service.store.sql_store import SqlStore
from tests.run_factories import (
    WIRE_DIGEST,
    WORKLOAD,
    FakeDispatcher,
    intake_folder,
    sha256,
    submitted,
)


def test_submitted_run_waits_with_everything_it_was_given(store: SqlStore, tmp_path: Path) -> None:
    """Number, deadline, digests and counts, as the door will answer them."""
    dispatcher = FakeDispatcher()
    folder = intake_folder(tmp_path / "in", body=b"the body")
    options = Options(label="Evening", deadline_seconds=90)

    run = Submit(store=store, dispatcher=dispatcher)(folder, options, LOCAL, WIRE_DIGEST)

    assert run.state is RunState.WAITING
    assert (run.number, run.label, run.attempt, run.crashes) == ("2026-02-03/1", "Evening", 0, 0)
    assert (run.deadline_at - run.created_at).total_seconds() == 90
    assert run.request_digest == sha256(b"the body")
    assert run.options_digest == sha256(canonical_json(options.to_document()))
    assert run.counts == {"items": 1, "sites": 2, "supply_rows": 1, "demand_rows": 1, "lanes": 8}
    assert (run.plan_digest, run.started_at, run.finished_at) == (None, None, None)
    assert dispatcher.notified == [run.id]
    with store.reading() as reading:
        assert reading.run(run.id, "local") == run


def test_first_event_says_who_asked_for_what(store: SqlStore, tmp_path: Path) -> None:
    """Every column of the run is in it, so that an audit can compare them."""
    actor = Actor(tenant="north", name="night-system", authentication="key")

    run = submitted(store, tmp_path / "in", actor=actor)

    with store.reading() as reading:
        (event,) = reading.events(f"run:{run.id}", "north")
    assert (event.seq, event.kind, event.actor, event.authentication) == (
        1,
        "submitted",
        "night-system",
        "key",
    )
    assert event.payload is not None
    assert event.payload["wire_digest"] == WIRE_DIGEST
    assert event.payload["number"] == 1
    assert run.submitted_by == "night-system"


def test_plan_for_of_the_options_goes_before_that_of_the_cut_off(
    store: SqlStore,
    tmp_path: Path,
) -> None:
    """A plan may be made the evening before the day it is for."""
    folder = intake_folder(tmp_path / "in", plan_for="2026-02-03")
    options = Options.from_document({**Options().to_document(), "plan_for": "2026-02-04"})

    run = Submit(store=store, dispatcher=FakeDispatcher())(folder, options, LOCAL, WIRE_DIGEST)

    assert run.number == "2026-02-04/1"


@pytest.mark.parametrize("name", ["request_digest", "network_digest"])
def test_digest_that_intake_did_not_take_is_refused(
    store: SqlStore,
    database: Database,
    tmp_path: Path,
    name: str,
) -> None:
    """A digest is written for good: it is taken once more here, of what is written."""
    folder = intake_folder(tmp_path / "in")
    summary = orjson.loads((folder / "intake.json").read_bytes())
    summary[name] = "sha-256:" + "0" * 64
    (folder / "intake.json").write_bytes(orjson.dumps(summary))
    dispatcher = FakeDispatcher()

    with pytest.raises(IntakeBroken):
        Submit(store=store, dispatcher=dispatcher)(folder, Options(), LOCAL, WIRE_DIGEST)

    with database.engine.connect() as connection:
        count = connection.exec_driver_sql("SELECT count(*) FROM run").scalar()
    assert (count, dispatcher.notified) == (0, [])


def test_run_of_another_tenant_is_not_known(store: SqlStore, tmp_path: Path) -> None:
    """Nor does the answer tell that it exists."""
    run = submitted(store, tmp_path / "in")

    for run_id, tenant in ((run.id, "other"), (RunId("run_" + "0" * 26), "local")):
        with pytest.raises(RunUnknown), store.reading() as reading:
            reading.run(run_id, tenant)


def test_network_that_planning_cannot_hold_is_refused_before_anything_is_stored(
    store: SqlStore, tmp_path: Path
) -> None:
    """With both numbers, so that whoever runs the service knows what to set; nobody is woken."""
    folder = intake_folder(tmp_path / "in")
    dispatcher = FakeDispatcher()
    estimated = estimated_peak_bytes(WORKLOAD)

    def submit(allowed: int) -> Run:
        submitting = Submit(store=store, dispatcher=dispatcher, plan_memory_bytes_max=allowed)
        return submitting(folder, Options(), LOCAL, WIRE_DIGEST)

    with pytest.raises(PlanTooLarge) as refused:
        submit(estimated - 1)

    assert (refused.value.estimated_bytes, refused.value.allowed_bytes) == (
        estimated,
        estimated - 1,
    )
    assert dispatcher.notified == []
    with store.reading() as reading:
        assert reading.waiting(limit=10) == []
    assert submit(estimated).number == "2026-02-03/1"
