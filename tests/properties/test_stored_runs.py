"""A run that is stored and read back is the run that was planned, and its evidence is intact."""

import tempfile
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import orjson
import pytest
from hypothesis import given

from service.network.options import Options, read_options
from service.planning.outcome import Outcome
from service.planning.task import plan
from service.proof import standalone
from service.proof.evidence import verify_evidence
from service.runs.evidence import Evidence, pack_evidence
from service.runs.execute import Execute
from service.runs.ports import Store
from service.runs.read import Read
from service.runs.run import LOCAL, Claim, Token
from service.runs.submit import Submit
from service.store.database import open_database
from service.store.migrate import migrate
from service.store.sql_store import SqlStore
from tests.databases import FakeClock
from tests.factories import plan_network, take_in
from tests.random_networks import RandomNetwork
from tests.run_factories import WIRE_DIGEST, FakeDispatcher
from tests.strategies import networks


@dataclass(frozen=True, slots=True)
class PlannerInThisProcess:
    """Plans where it is called; what supervises children is tested where they are."""

    def plan(self, claim: Claim, source: Path, options: Options, target: Path) -> Outcome:
        """Run the real planning task for whatever claim."""
        assert claim.seconds_left > 0
        return plan(source, options, target)

    def progress(self, token: Token) -> None:
        """Tell nothing: nobody watches."""
        assert token


@pytest.fixture(scope="module")
def store(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Store]:
    """Return one store for all examples: rows of many runs must not meet."""
    url = f"sqlite:///{tmp_path_factory.mktemp('stored') / 'lanewright.db'}"
    migrate(url)
    database = open_database(url)
    yield SqlStore(database, FakeClock())
    database.close()


@given(network=networks())
def test_a_run_comes_back_as_it_was_planned(store: Store, network: RandomNetwork) -> None:
    """What is read is, to the byte, what was sent and what the planning task answers to it.

    And a plan is a function of network and options: planned twice, it is the same bytes.
    """
    body = orjson.dumps(network.document)
    options, _ = read_options(network.options)
    assert options is not None
    read = Read(store=store)
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        take_in(body, folder, options)
        submit = Submit(store=store, dispatcher=FakeDispatcher())
        waiting = submit(folder, options, LOCAL, WIRE_DIGEST)
        assert read.run(waiting.id, LOCAL.tenant) == waiting
        execute = Execute(
            store=store,
            planner=PlannerInThisProcess(),
            scratch=folder,
            lease_seconds=30,
        )
        state = execute(waiting.id)
        evidence = folder / "evidence.zip"
        Evidence(read=read, pack=pack_evidence)(waiting.id, LOCAL.tenant, evidence)
        verdict, problems = standalone.verify(evidence.read_bytes())
        assert verify_evidence(evidence).verdict == verdict == "intact", problems

    again = plan_network(network.document, **network.options)
    run = read.run(waiting.id, LOCAL.tenant)
    assert run.state == state == again.plan["status"]
    assert run.network_digest == again.network_digest
    assert read.plan_bytes(run.id, LOCAL.tenant) == again.plan_bytes
    assert orjson.loads(read.certificate_bytes(run.id, LOCAL.tenant)) == again.certificate
    assert read.network_bytes(run.id, LOCAL.tenant, form="received") == body
    stored_options = orjson.loads(read.options_bytes(run.id, LOCAL.tenant))
    assert Options.from_document(stored_options) == options
