"""Reading: runs and their artefacts as they are stored; nothing is computed here."""

from dataclasses import dataclass
from pathlib import Path

from service.runs.events import event_document, run_stream
from service.runs.faults import ArtefactMissing
from service.runs.ports import Store
from service.runs.run import Run, RunId


@dataclass(frozen=True, slots=True, kw_only=True)
class Read:
    """The reads of a run; every one of them raises ``RunUnknown`` for another tenant's run."""

    store: Store

    def run(self, run_id: RunId, tenant: str) -> Run:
        """Return the run as it is now."""
        with self.store.reading() as reading:
            return reading.run(run_id, tenant)

    def plan_bytes(self, run_id: RunId, tenant: str) -> bytes:
        """Return the plan document as it was stored; raise ``ArtefactMissing`` without one."""
        run = self.run(run_id, tenant)
        return self._artefact(run, run.plan_digest, "plan")

    def certificate_bytes(self, run_id: RunId, tenant: str) -> bytes:
        """Return the certificate as it was stored; raise ``ArtefactMissing`` without one."""
        run = self.run(run_id, tenant)
        return self._artefact(run, run.certificate_digest, "certificate")

    def network_bytes(self, run_id: RunId, tenant: str, *, form: str = "normal") -> bytes:
        """Return the body as ``received``, or the file of its ``normal`` form."""
        if form not in {"normal", "received"}:
            raise ValueError(f"no form of a network: {form!r}")
        with self.store.reading() as reading:
            submission = reading.submission(run_id, tenant)
        received = form == "received"
        digest = submission.request_digest if received else submission.normal_digest
        return self.store.blob(tenant, digest)

    def network_to_file(self, run_id: RunId, tenant: str, path: Path) -> None:
        """Write the file of the normal form to ``path``, part by part."""
        with self.store.reading() as reading:
            submission = reading.submission(run_id, tenant)
        self.store.blob_to_file(tenant, submission.normal_digest, path)

    def to_file(self, digest: str | None, run: Run, name: str, path: Path) -> None:
        """Write the artefact ``name`` to ``path``; raise ``ArtefactMissing`` without one."""
        if digest is None:
            raise ArtefactMissing(run, name)
        self.store.blob_to_file(run.tenant, digest, path)

    def options_bytes(self, run_id: RunId, tenant: str) -> bytes:
        """Return the options as they were digested."""
        with self.store.reading() as reading:
            submission = reading.submission(run_id, tenant)
        return self.store.blob(tenant, submission.options_digest)

    def history(self, run_id: RunId, tenant: str) -> list[dict[str, object]]:
        """Return who did what to the run, and when, in order."""
        with self.store.reading() as reading:
            reading.run(run_id, tenant)
            events = reading.events(run_stream(run_id), tenant)
        return [event_document(event) for event in events]

    def _artefact(self, run: Run, digest: str | None, name: str) -> bytes:
        if digest is None:
            raise ArtefactMissing(run, name)
        return self.store.blob(run.tenant, digest)
