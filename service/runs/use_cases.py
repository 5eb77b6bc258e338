"""What every door receives: the use cases, as calls. Tests put fakes in their place."""

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Protocol

from service.runs.run import Actor, Run, RunId

if TYPE_CHECKING:
    from service.network.intake import IntakeReport
    from service.network.options import Options


class IntakeCall(Protocol):
    """Checks a spooled network in a child of its own."""

    def __call__(
        self,
        spool: Path,
        folder: Path,
        *,
        options: "Options",
        media_type: str,
        content_encoding: str | None,
    ) -> "IntakeReport":
        """Check ``spool``; leave ``received``, ``network.zip``, ``intake.json`` in ``folder``."""
        ...


class SubmitCall(Protocol):
    """Stores a checked network as a waiting run."""

    def __call__(self, folder: Path, options: "Options", actor: Actor, wire_digest: str) -> Run:
        """Store what intake left in ``folder``; what is returned is on disk."""
        ...


class RunCall(Protocol):
    """Reads one run."""

    def __call__(self, run_id: RunId, tenant: str) -> Run:
        """Return the run as it is now, or raise ``RunUnknown``."""
        ...


class BytesCall(Protocol):
    """Reads one artefact of a run."""

    def __call__(self, run_id: RunId, tenant: str) -> bytes:
        """Return the bytes as stored, or raise ``RunUnknown`` or ``ArtefactMissing``."""
        ...


class NetworkCall(Protocol):
    """Reads the network of a run."""

    def __call__(self, run_id: RunId, tenant: str, *, form: str = "normal") -> bytes:
        """Return the body as ``received`` or the ``normal`` form (a zip)."""
        ...


class HistoryCall(Protocol):
    """Reads who did what to a run, and when."""

    def __call__(self, run_id: RunId, tenant: str) -> list[dict[str, object]]:
        """Return event documents ``{"event", "payload", "salt"}`` in order."""
        ...


class EvidenceCall(Protocol):
    """Packs plan, certificate and history so that a stranger can check them."""

    def __call__(self, run_id: RunId, tenant: str, path: Path) -> None:
        """Write the evidence zip of a run to ``path``."""
        ...


class ReadinessCall(Protocol):
    """Says whether the service can do its work."""

    def __call__(self) -> list[str]:
        """Return what is missing, in words; empty means ready."""
        ...


@dataclass(frozen=True, slots=True, kw_only=True)
class Application:
    """The use cases, as every door receives them (built by ``runs/application.py``)."""

    intake: IntakeCall
    submit: SubmitCall
    run: RunCall
    plan_bytes: BytesCall
    certificate_bytes: BytesCall
    network_bytes: NetworkCall
    history: HistoryCall
    evidence: EvidenceCall
    readiness: ReadinessCall
