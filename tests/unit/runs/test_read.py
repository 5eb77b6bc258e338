"""Reading: bytes as they were stored, and a plain answer where there are none."""

from pathlib import Path

import pytest

from service.planning.outcome import FailureReason, State
from service.runs.application import application
from service.runs.faults import ArtefactMissing, RunUnknown
from service.runs.read import Read
from service.runs.run import RunState
from service.store.sql_store import SqlStore
from tests.run_factories import FakeDispatcher, FakePlanner, execution, outcome, submitted


def test_bytes_come_back_as_they_were_received(store: SqlStore, tmp_path: Path) -> None:
    """Also the spaces that somebody sent: the digest is over them."""
    body = b'{ "format" : 1 }\n'
    run = submitted(store, tmp_path / "in", body=body)
    read = Read(store=store)

    assert read.network_bytes(run.id, "local", form="received") == body
    assert read.network_bytes(run.id, "local") == (tmp_path / "in" / "network.zip").read_bytes()
    with pytest.raises(ValueError, match="sideways"):
        read.network_bytes(run.id, "local", form="sideways")


@pytest.mark.parametrize("state", [None, "failed"])
def test_run_without_a_plan_says_so(store: SqlStore, tmp_path: Path, state: State | None) -> None:
    """A door turns this into words; an empty plan would be a wrong one."""
    run = submitted(store, tmp_path / "in")
    if state is not None:
        planner = FakePlanner(outcome=outcome(state, reason=FailureReason.INTERNAL))
        execution(store, tmp_path, planner)(run.id)
    read = Read(store=store)

    for artefact in (read.plan_bytes, read.certificate_bytes):
        with pytest.raises(ArtefactMissing) as missing:
            artefact(run.id, "local")
        assert missing.value.run.state == (state or RunState.WAITING)


def test_every_read_of_another_tenants_run_is_unknown(store: SqlStore, tmp_path: Path) -> None:
    """One that forgot the tenant would show everything to everybody."""
    run = submitted(store, tmp_path / "in")
    execution(store, tmp_path)(run.id)
    app = application(
        store=store,
        dispatcher=FakeDispatcher(),
        intake=lambda *_, **__: pytest.fail("not asked for"),
        pack=lambda *_: pytest.fail("not asked for"),
        plan_memory_bytes_max=2**30,
        engine_missing=lambda: ["a planning slot"],
    )

    reads = (app.run, app.plan_bytes, app.certificate_bytes, app.network_bytes, app.history)
    for read in reads:
        assert read(run.id, "local")
        with pytest.raises(RunUnknown):
            read(run.id, "other")
    with pytest.raises(RunUnknown):
        app.evidence(run.id, "other", tmp_path / "evidence.zip")
    assert app.readiness() == ["a planning slot"]
