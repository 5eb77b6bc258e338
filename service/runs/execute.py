"""Executing: claim a run, have it planned in a child, store the outcome once.

The claim is fenced by a token: whoever lost it, to a lease that ran out or to a cancellation,
writes nothing. The finish may be repeated; of several with one token, the first is stored.
"""

import shutil
import tempfile
import time
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Final

import orjson

from service.network.intake_files import INTAKE_FILE, NETWORK_FILE
from service.network.options import Options
from service.planning.outcome import (
    CERTIFICATE_FILE,
    PLAN_FILE,
    WARM_START_FILE,
    FailureReason,
    Outcome,
)
from service.runs.events import run_stream
from service.runs.faults import (
    BlobBroken,
    ChildCrashed,
    ChildMemory,
    ChildReleased,
    ChildTimeout,
    StoreUnavailable,
)
from service.runs.identity import new_token
from service.runs.index_rows import index_rows
from service.runs.lifecycle import CRASHES_MAX
from service.runs.ports import Planner, Store
from service.runs.records import EventKind, GivenBack, claimed_payload, seconds_texts
from service.runs.run import (
    STORED,
    Claim,
    Ending,
    Finish,
    IndexRows,
    Progress,
    RunId,
    RunState,
    Staged,
    engine_of,
)
from service.runs.settle import count_crash, end, give_back

# Prices and a shortlist of a hundred thousand places take 3 MB; more than this is a mistake.
WARM_START_BYTES_MAX: Final = 32 * 2**20
_PAUSE_SECONDS: Final = 0.5


@dataclass(frozen=True, slots=True, kw_only=True)
class Result:
    """How planning ended, ready to be stored; a failure may have left nothing behind."""

    state: RunState
    reason: FailureReason | None
    detail: str | None
    plan: Staged | None = None
    certificate: Staged | None = None
    rows: IndexRows | None = None
    seconds: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class Execute:
    """Plans one run from claim to finish.

    ``scratch`` is a folder for the files that pass between processes. ``pause`` waits between
    two tries to reach a lost database, ``elapsed`` counts seconds on a monotonic clock.
    """

    store: Store
    planner: Planner
    scratch: Path
    lease_seconds: float
    crashes_max: int = CRASHES_MAX
    pause: Callable[[float], None] = time.sleep
    elapsed: Callable[[], float] = time.monotonic

    def __call__(self, run_id: RunId) -> RunState | None:
        """Plan the run if it can be claimed; return its state afterwards.

        None when there was nothing to claim, or when the claim was lost meanwhile. Raises
        ``StoreUnavailable`` when the database stayed away until the lease was over: the run is not
        lost, whoever sweeps gives it to the next.
        """
        claim = self._claim(run_id)
        if claim is None:
            return None
        with self._folder(claim) as folder:
            began = self.elapsed()
            try:
                result = self._plan(claim, folder)
            except ChildCrashed as error:
                detail = str(error)
                return self._persist(lambda: self._crashed(claim, detail))
            except ChildReleased:
                return self._persist(lambda: give_back(self.store, claim, GivenBack.RELEASE))
            except StoreUnavailable:
                return self._persist(lambda: give_back(self.store, claim, GivenBack.STORE))
            except Exception:
                # A mistake of ours: whoever supervises logs it; the run must not hang till then.
                broken = _failed(FailureReason.INTERNAL, "The service made a mistake; see its log.")
                self._persist(lambda: self._finish(claim, broken, None))
                raise
            progress = self._progress(claim, result, began)
            state = self._persist(lambda: self._finish(claim, result, progress))
            if state is RunState.PLANNED:
                self._keep_warm_start(claim, folder)
            return state

    def _claim(self, run_id: RunId) -> Claim | None:
        with self.store.transaction() as transaction:
            claim = transaction.claim(
                run_id,
                token=new_token(),
                lease_seconds=self.lease_seconds,
                crashes_max=self.crashes_max,
            )
            if claim is not None:
                crashes = transaction.run(run_id, claim.tenant).crashes
                transaction.append(
                    run_stream(run_id),
                    EventKind.CLAIMED,
                    engine_of(claim.tenant),
                    claimed_payload(claim, crashes=crashes),
                )
            return claim

    def _plan(self, claim: Claim, folder: Path) -> Result:
        source, target = folder / "in", folder / "out"
        source.mkdir()
        target.mkdir()
        try:
            options = self._unpack(claim, source)
            outcome = self.planner.plan(claim, source, options, target)
        except ChildTimeout:
            return _failed(FailureReason.TIME_LIMIT, "Planning was ended at the run's deadline.")
        except ChildMemory:
            return _failed(FailureReason.MEMORY_LIMIT, "Planning needed more memory than allowed.")
        except BlobBroken as error:
            return _failed(FailureReason.INTERNAL, f"What was submitted cannot be read: {error}.")
        return self._result(claim, outcome, target)

    def _unpack(self, claim: Claim, source: Path) -> Options:
        with self.store.reading() as reading:
            submission = reading.submission(claim.run_id, claim.tenant)
        tenant = claim.tenant
        self.store.blob_to_file(tenant, submission.normal_digest, source / NETWORK_FILE)
        self.store.blob_to_file(tenant, submission.intake_digest, source / INTAKE_FILE)
        if claim.crashes == 0:
            # After a crash everything that is not needed stays away from the next child.
            warm = self.store.warm_start(
                tenant,
                network_digest=submission.network_digest,
                likeness=claim.needs.likeness,
            )
            if warm is not None:
                (source / WARM_START_FILE).write_bytes(warm)
        document = orjson.loads(self.store.blob(tenant, submission.options_digest))
        return Options.from_document(document)

    def _result(self, claim: Claim, outcome: Outcome, target: Path) -> Result:
        state = RunState(outcome.state)
        plan_file, certificate_file = target / PLAN_FILE, target / CERTIFICATE_FILE
        both = plan_file.is_file() and certificate_file.is_file()
        if state is not RunState.FAILED and not both:
            return _failed(FailureReason.INTERNAL, "Planning ended without its artefacts.")
        # A plan whose certificate fails is kept, both of it, but it is nobody's plan to search.
        searchable = state in {RunState.PLANNED, RunState.NO_PLAN}
        document: dict[str, Any] = orjson.loads(plan_file.read_bytes()) if searchable else {}
        return Result(
            state=state,
            reason=outcome.reason,
            detail=outcome.detail,
            plan=self.store.stage_file(claim.tenant, plan_file) if both else None,
            certificate=self.store.stage_file(claim.tenant, certificate_file) if both else None,
            rows=index_rows(document) if searchable else None,
            seconds=seconds_texts(outcome.seconds),
        )

    def _progress(self, claim: Claim, result: Result, began: float) -> Progress | None:
        """Return how far the run has come by being stored; None: no further than it told."""
        if result.state is RunState.FAILED:
            return None
        told = self.planner.progress(claim.token)
        return Progress(
            phase=STORED,
            counts={} if told is None else told.counts,
            seconds=round(self.elapsed() - began, 3),
        )

    def _keep_warm_start(self, claim: Claim, folder: Path) -> None:
        """Keep what planning found out for the next run; this one is stored already."""
        path = folder / "out" / WARM_START_FILE
        if path.is_file() and path.stat().st_size <= WARM_START_BYTES_MAX:
            self.store.keep_warm_start(claim.run_id, claim.tenant, path.read_bytes())

    def _finish(self, claim: Claim, result: Result, progress: Progress | None) -> RunState | None:
        with self.store.transaction() as transaction:
            ending = Ending(
                state=result.state,
                reason=result.reason,
                detail=result.detail,
                attempt=claim.attempt,
                started_at=transaction.run(claim.run_id, claim.tenant).started_at,
                finished_at=transaction.now,
                plan_digest=None if result.plan is None else result.plan.digest,
                certificate_digest=(
                    None if result.certificate is None else result.certificate.digest
                ),
                seconds=result.seconds,
            )
            finish = end(transaction, claim, ending, progress=progress)
            if finish is Finish.STORED:
                for staged in (result.plan, result.certificate):
                    if staged is not None:
                        transaction.add_blob(staged)
                if result.rows is not None:
                    transaction.add_index_rows(claim.run_id, claim.tenant, result.rows)
            return None if finish is Finish.FENCED else result.state

    def _crashed(self, claim: Claim, detail: str) -> RunState | None:
        return count_crash(
            self.store,
            claim,
            GivenBack.CRASH,
            detail=detail,
            crashes_max=self.crashes_max,
        )

    def _persist(self, write: Callable[[], RunState | None]) -> RunState | None:
        """Repeat ``write`` while the database is away, as long as the lease can last."""
        give_up_at = self.elapsed() + self.lease_seconds
        while True:
            try:
                return write()
            except StoreUnavailable:
                if self.elapsed() >= give_up_at:
                    raise
                self.pause(_PAUSE_SECONDS)

    @contextmanager
    def _folder(self, claim: Claim) -> Iterator[Path]:
        self.scratch.mkdir(parents=True, exist_ok=True)
        folder = Path(tempfile.mkdtemp(prefix=f"{claim.run_id}-", dir=self.scratch))
        try:
            yield folder
        finally:
            shutil.rmtree(folder, ignore_errors=True)


def _failed(reason: FailureReason, detail: str) -> Result:
    return Result(state=RunState.FAILED, reason=reason, detail=detail)
