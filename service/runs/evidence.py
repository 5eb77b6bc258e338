"""Evidence: plan, certificate and history in one zip that a stranger can check."""

import io
import zipfile
from dataclasses import dataclass
from pathlib import Path

import orjson

from service.network.options import Options
from service.proof.evidence import write_evidence
from service.runs.faults import ArtefactMissing
from service.runs.read import Read
from service.runs.run import FailureReason, RunId


@dataclass(frozen=True, slots=True, kw_only=True)
class Evidence:
    """Packs what is stored of a run; nothing is computed anew."""

    read: Read

    def __call__(self, run_id: RunId, tenant: str, path: Path) -> None:
        """Write the evidence of a run to ``path``.

        Raises ``ArtefactMissing`` while there is no proved plan, nor a proof that there is none.
        """
        run = self.read.run(run_id, tenant)
        if run.reason is FailureReason.PROOF_FAILED:
            # Both artefacts are kept for us to look into, but they prove nothing.
            raise ArtefactMissing(run, "evidence")
        plan = self.read.plan_bytes(run_id, tenant)
        certificate = self.read.certificate_bytes(run_id, tenant)
        with zipfile.ZipFile(io.BytesIO(self.read.network_bytes(run_id, tenant))) as archive:
            entries = {name: archive.read(name) for name in archive.namelist()}
        options = orjson.loads(self.read.options_bytes(run_id, tenant))
        write_evidence(
            path,
            network_entries=entries,
            options=Options.from_document(options),
            plan_bytes=plan,
            certificate_bytes=certificate,
            history=self.read.history(run_id, tenant),
            versions=orjson.loads(certificate)["versions"],
        )
