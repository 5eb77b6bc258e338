"""How a planning task ended, and its files: small enough to be loaded where no solver may be."""

from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from typing import Final, Literal

PLAN_FILE: Final = "plan.json"
CERTIFICATE_FILE: Final = "certificate.json"
WARM_START_FILE: Final = "warm_start"

State = Literal["planned", "no_plan", "failed"]


class FailureReason(StrEnum):
    """Why a run ended as ``failed``."""

    # Said by whoever has it planned, where planning cannot say anything any more.
    DEADLINE = "deadline"
    TIME_LIMIT = "time_limit"
    MEMORY_LIMIT = "memory_limit"
    SOLVER_CRASHED = "solver_crashed"
    # Said by planning.
    NUMBERS_TOO_LARGE = "numbers_too_large"
    PROOF_FAILED = "proof_failed"
    # A mistake of ours, wherever it was made; planning lets its own pass as exceptions.
    INTERNAL = "internal"


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
