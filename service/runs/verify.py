"""Verifying a stored run: its evidence, checked as a stranger would check it."""

import tempfile
from dataclasses import dataclass
from pathlib import Path

from service.proof.evidence import Verdict, verify_evidence
from service.runs.evidence import Evidence
from service.runs.run import RunId


@dataclass(frozen=True, slots=True, kw_only=True)
class Verify:
    """Checks what is stored of a run: chain, digests, and the proof of its plan."""

    evidence: Evidence

    def __call__(self, run_id: RunId, tenant: str) -> Verdict:
        """Return the verdict on the evidence that the run has now."""
        with tempfile.TemporaryDirectory() as folder:
            path = Path(folder) / "evidence.zip"
            self.evidence(run_id, tenant, path)
            return verify_evidence(path)
