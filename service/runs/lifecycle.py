"""Which moves a run may make; nothing else changes its state."""

from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from typing import Final

from service.runs.run import RunState

CRASHES_MAX: Final = 3
"""A run whose children died this often by themselves ends as ``failed``: ``solver_crashed``.

Three strikes tell a poisonous network from a passing accident; more would only keep the slot from
others.
"""

FINAL: Final = frozenset(
    {RunState.PLANNED, RunState.NO_PLAN, RunState.FAILED, RunState.CANCELLED},
)


class Move(StrEnum):
    """What can happen to a run after it was submitted."""

    CLAIM = "claim"
    TAKE_OVER = "take_over"
    RENEW = "renew"
    GIVE_BACK = "give_back"
    FINISH = "finish"
    EXPIRE = "expire"
    CANCEL = "cancel"


@dataclass(frozen=True, slots=True, kw_only=True)
class Rule:
    """From where to where one move leads."""

    sources: frozenset[RunState]
    targets: frozenset[RunState]


RULES: Final[Mapping[Move, Rule]] = {
    Move.CLAIM: Rule(
        sources=frozenset({RunState.WAITING}),
        targets=frozenset({RunState.RUNNING}),
    ),
    # The holder's lease is over: another one takes the run, and the crash is counted.
    Move.TAKE_OVER: Rule(
        sources=frozenset({RunState.RUNNING}),
        targets=frozenset({RunState.RUNNING}),
    ),
    Move.RENEW: Rule(
        sources=frozenset({RunState.RUNNING}),
        targets=frozenset({RunState.RUNNING}),
    ),
    Move.GIVE_BACK: Rule(
        sources=frozenset({RunState.RUNNING}),
        targets=frozenset({RunState.WAITING}),
    ),
    Move.FINISH: Rule(
        sources=frozenset({RunState.RUNNING}),
        targets=frozenset({RunState.PLANNED, RunState.NO_PLAN, RunState.FAILED}),
    ),
    # The deadline passed while the run waited.
    Move.EXPIRE: Rule(
        sources=frozenset({RunState.WAITING}),
        targets=frozenset({RunState.FAILED}),
    ),
    Move.CANCEL: Rule(
        sources=frozenset({RunState.WAITING, RunState.RUNNING}),
        targets=frozenset({RunState.CANCELLED}),
    ),
}


def may_move(source: RunState, target: RunState) -> bool:
    """Return whether any move leads from ``source`` to ``target``."""
    return any(source in rule.sources and target in rule.targets for rule in RULES.values())
