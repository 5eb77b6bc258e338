"""Evidence: plan, certificate and history in one zip that a stranger can check."""

import zipfile
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Final

import orjson

from service.network.intake_files import NETWORK_FILE
from service.network.options import Options
from service.planning.outcome import CERTIFICATE_FILE, PLAN_FILE, FailureReason
from service.proof.evidence import write_evidence
from service.runs.faults import ArtefactMissing, ChildCrashed, ChildMemory
from service.runs.read import Read
from service.runs.run import RunId

OPTIONS_FILE: Final = "options.json"
HISTORY_FILE: Final = "history.json"

Pack = Callable[[Path, Path], None]
"""Does what ``pack_evidence`` does, in a child: a large network is seconds of Python."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Evidence:
    """Packs what is stored of a run; nothing is computed anew."""

    read: Read
    pack: Pack

    def __call__(self, run_id: RunId, tenant: str, path: Path) -> None:
        """Write the evidence of a run to ``path``; its parts are left in a folder beside it.

        Raises ``ArtefactMissing`` while there is no proved plan, nor a proof that there is none.
        """
        run = self.read.run(run_id, tenant)
        if run.reason is FailureReason.PROOF_FAILED:
            # Both artefacts are kept for us to look into, but they prove nothing.
            raise ArtefactMissing(run, "evidence")
        folder = path.with_name(f"{path.name}-parts")
        folder.mkdir()
        self.read.to_file(run.plan_digest, run, "plan", folder / PLAN_FILE)
        self.read.to_file(run.certificate_digest, run, "certificate", folder / CERTIFICATE_FILE)
        self.read.network_to_file(run_id, tenant, folder / NETWORK_FILE)
        (folder / OPTIONS_FILE).write_bytes(self.read.options_bytes(run_id, tenant))
        history = self.read.history(run_id, tenant)
        (folder / HISTORY_FILE).write_bytes(orjson.dumps(history))
        try:
            self.pack(folder, path)
        except ChildMemory as error:
            # It needs less than planning did: a mistake of ours, not of whoever asks.
            raise ChildCrashed(f"packing evidence {error}") from error


def pack_evidence(folder: Path, path: Path) -> None:
    """Write the evidence whose parts lie in ``folder`` to ``path``."""
    certificate = (folder / CERTIFICATE_FILE).read_bytes()
    with zipfile.ZipFile(folder / NETWORK_FILE) as archive:
        entries = {name: archive.read(name) for name in archive.namelist()}
    write_evidence(
        path,
        network_entries=entries,
        options=Options.from_document(orjson.loads((folder / OPTIONS_FILE).read_bytes())),
        plan_bytes=(folder / PLAN_FILE).read_bytes(),
        certificate_bytes=certificate,
        history=orjson.loads((folder / HISTORY_FILE).read_bytes()),
        versions=orjson.loads(certificate)["versions"],
    )
