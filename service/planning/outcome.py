"""How a planning task ended, and its files: small enough to be loaded where no solver may be."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final, Literal

PLAN_FILE: Final = "plan.json"
CERTIFICATE_FILE: Final = "certificate.json"

State = Literal["planned", "no_plan", "failed"]
FailureReason = Literal["numbers_too_large", "proof_failed", "internal"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Outcome:
    """How a planning task ended; ``seconds`` are wall time by phase.

    ``planned`` and ``no_plan`` are answers with a proof. ``proof_failed`` leaves both files for
    whoever looks into it; no one else may be shown them as a plan.
    """

    state: State
    reason: FailureReason | None
    detail: str | None
    seconds: Mapping[str, float]
