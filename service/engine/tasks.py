"""The kinds of work that children do, in the form in which the use cases call them."""

import threading
import time
from collections.abc import Collection, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Final

import orjson
import structlog

from service.engine.children import Nursery
from service.engine.process import address_space_bytes
from service.network.faults import Status
from service.network.intake_files import INTAKE_FILE, NETWORK_FILE, RECEIVED_FILE
from service.network.options import Options
from service.planning.memory import limit_bytes
from service.planning.outcome import FailureReason, Outcome
from service.runs.faults import ChildCrashed, ChildMemory, ChildTimeout
from service.runs.run import Claim, Progress, Token

if TYPE_CHECKING:
    from service.network.intake import IntakeReport

# An auditor fetches one at a time; more at once would take the cores from those who plan.
EVIDENCE_AT_ONCE: Final = 2

_log = structlog.get_logger(__name__)


class IntakeChildren:
    """Checks networks, each in a child; an ``IntakeCall``.

    It may be called from any thread, and by as many at a time as there shall be children.
    """

    def __init__(
        self,
        nursery: Nursery,
        *,
        seconds: float,
        memory_bytes: int,
        limits: Mapping[str, int],
    ) -> None:
        """Check with children of ``nursery``; ``limits`` are those of the intake itself."""
        self._nursery = nursery
        self._seconds = seconds
        self._memory_bytes = memory_bytes
        self._limits = dict(limits)
        self._closed = threading.Event()

    def __call__(
        self,
        spool: Path,
        folder: Path,
        *,
        options: Options,
        media_type: str,
        content_encoding: str | None,
    ) -> "IntakeReport":
        """Check ``spool``; leave ``received``, ``network.zip``, ``intake.json`` in ``folder``."""
        task = intake_task(
            spool,
            folder,
            options=options,
            media_type=media_type,
            content_encoding=content_encoding,
            limits=self._limits,
        )
        child = self._nursery.take()
        answer = child.ask(
            task, seconds=self._seconds, memory_bytes=self._memory_bytes, released=self._closed
        )
        received = folder / RECEIVED_FILE
        size = received.stat().st_size if received.exists() else spool.stat().st_size
        self._nursery.give_back(child, input_bytes=size)
        return read_report(answer, folder)

    def close(self) -> None:
        """End every check that is under way and every child."""
        self._closed.set()
        self._nursery.close()


class EvidenceChildren:
    """Packs evidence, each in a child; a ``Pack``."""

    def __init__(self, nursery: Nursery, *, seconds: float, memory_bytes: int) -> None:
        """Pack with children of ``nursery``."""
        self._nursery = nursery
        self._seconds = seconds
        self._memory_bytes = memory_bytes
        self._places = threading.BoundedSemaphore(EVIDENCE_AT_ONCE)
        self._closed = threading.Event()

    def __call__(self, source: Path, target: Path) -> None:
        """Pack the parts in ``source`` into ``target``."""
        with self._places:
            child = self._nursery.take()
            child.ask(
                {"source": str(source), "target": str(target)},
                seconds=self._seconds,
                memory_bytes=self._memory_bytes,
                released=self._closed,
            )
            self._nursery.give_back(child, input_bytes=target.stat().st_size)

    def close(self) -> None:
        """End every packing that is under way and every child."""
        self._closed.set()
        self._nursery.close()


class PlanningChildren:
    """Plans networks, each in a child; a ``Planner``.

    It remembers under which claim each of its callers works, so that leases are renewed and a child
    whose claim is gone is ended. A claim is remembered until its caller says ``settled``: to store
    a large plan takes a while, too, in which the lease must not run out.
    """

    def __init__(self, nursery: Nursery, *, memory_bytes: int) -> None:
        """Plan with children of ``nursery``, each within ``memory_bytes``."""
        self._nursery = nursery
        self._memory_bytes = memory_bytes
        self._lock = threading.Lock()
        # By the calling thread, which works on one run at a time.
        self._busy: dict[int, _Work] = {}
        self._closed = False

    def plan(self, claim: Claim, source: Path, options: Options, target: Path) -> Outcome:
        """Plan the network in ``source`` within the seconds that ``claim`` has left."""
        until = time.monotonic() + claim.seconds_left
        work = _Work(claim.token)
        with self._lock:
            self._busy[threading.get_ident()] = work
            if self._closed:
                work.released.set()

        task = plan_task(source, target, options=options)
        estimated = claim.needs.memory_bytes
        try:
            answer = self._ask(task, work, until=until, estimated=estimated)
        except ChildMemory:
            if estimated is None or limit_bytes(estimated, allowed=self._memory_bytes, held=0) >= (
                self._memory_bytes
            ):
                raise
            # A wrong estimate of ours must cost time, and no run.
            _log.warning("memory_estimate_too_low", run_id=claim.run_id, bytes=estimated)
            answer = self._ask(task, work, until=until, estimated=None)
        return read_outcome(answer)

    def _ask(
        self, task: Mapping[str, object], work: "_Work", *, until: float, estimated: int | None
    ) -> Mapping[str, object]:
        """Have ``task`` done by a child whose limit follows from the estimate."""
        child = self._nursery.take()
        seconds = until - time.monotonic()
        if seconds <= 0:
            self._nursery.give_back(child, input_bytes=0)
            raise ChildTimeout("there was no time left to plan in")
        held = address_space_bytes(child.pid)
        answer = child.ask(
            task,
            seconds=seconds,
            memory_bytes=limit_bytes(estimated, allowed=self._memory_bytes, held=held),
            released=work.released,
            on_progress=work.told,
        )
        network = Path(str(task["source"])) / NETWORK_FILE
        self._nursery.give_back(child, input_bytes=network.stat().st_size)
        return answer

    def settled(self) -> None:
        """Forget the claim of the calling thread: its run is stored, or given back."""
        with self._lock:
            self._busy.pop(threading.get_ident(), None)

    def tokens(self) -> frozenset[Token]:
        """Return the claims under which something is being planned or stored now."""
        with self._lock:
            return frozenset(work.token for work in self._busy.values())

    def progress(self, token: Token) -> Progress | None:
        """Return what planning under ``token`` told last, None if nothing yet."""
        with self._lock:
            told = [work.progress for work in self._busy.values() if work.token == token]
        return told[0] if told else None

    def release(self, tokens: Collection[Token]) -> None:
        """End the children that work under ``tokens``; their callers get ``ChildReleased``."""
        with self._lock:
            for work in self._busy.values():
                if work.token in tokens:
                    work.released.set()

    def close(self) -> None:
        """End every child, now and for good."""
        with self._lock:
            self._closed = True
            for work in self._busy.values():
                work.released.set()
        self._nursery.close()


class _Work:
    """What is being planned under one claim, and how far it is."""

    def __init__(self, token: Token) -> None:
        """Begin now."""
        self.token = token
        self.released = threading.Event()
        self.progress: Progress | None = None
        self._began = time.monotonic()

    def told(self, phase: str, numbers: Mapping[str, int]) -> None:
        """Note a message of the child's; counts of former phases stay beside it."""
        counts = {**(self.progress.counts if self.progress is not None else {}), **numbers}
        seconds = round(time.monotonic() - self._began, 3)
        # One assignment of a finished object: another thread reads it meanwhile.
        self.progress = Progress(phase=phase, counts=counts, seconds=seconds)
        _log.info("planning", phase=phase, seconds=seconds, **numbers)


def intake_task(  # noqa: PLR0913 - the six things that the check is told, by name
    spool: Path,
    folder: Path,
    *,
    options: Options,
    media_type: str,
    content_encoding: str | None,
    limits: Mapping[str, int],
) -> dict[str, object]:
    """Return an input check as the task of a child."""
    return {
        "spool": str(spool),
        "folder": str(folder),
        "options": options.to_document(),
        "media_type": media_type,
        "content_encoding": content_encoding,
        "limits": dict(limits),
    }


def plan_task(source: Path, target: Path, *, options: Options) -> dict[str, object]:
    """Return the planning of the network in ``source`` as the task of a child."""
    return {"source": str(source), "target": str(target), "options": options.to_document()}


def read_report(answer: Mapping[str, object], folder: Path) -> "IntakeReport":
    """Return the report that an intake child answered, with the summary that it left on disk."""
    from service.network.intake import IntakeReport  # noqa: PLC0415 - loads when first needed

    summary = None
    if answer["status"] == Status.ACCEPTED:
        summary = orjson.loads((folder / INTAKE_FILE).read_bytes())
    return IntakeReport.from_document({**answer, "summary": summary})


def read_outcome(answer: Mapping[str, object]) -> Outcome:
    """Return the outcome that a planning child answered; raise ``ChildCrashed`` if it is none."""
    match answer:
        case {
            "state": "planned" | "no_plan" | "failed" as state,
            "reason": str() | None as reason,
            "detail": str() | None as detail,
            "seconds": dict(seconds),
        }:
            try:
                known = None if reason is None else FailureReason(reason)
            except ValueError as error:
                raise ChildCrashed(f"answered with a reason that is none: {reason}") from error
            return Outcome(state=state, reason=known, detail=detail, seconds=seconds)
    raise ChildCrashed("answered with something that is no outcome")
