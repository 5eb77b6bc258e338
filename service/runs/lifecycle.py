"""Which moves a run may make, and who may make them; nothing else changes its state."""

from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from typing import Final

from service.runs.run import RunState

CRASHES_MAX: Final = 3
"""A run whose children died this often by themselves ends as ``failed``: ``solver_crashed``."""

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


class Mover(StrEnum):
    """Who may make a move."""

    ENGINE = "engine"
    CLIENT = "client"


@dataclass(frozen=True, slots=True, kw_only=True)
class Rule:
    """From where to where one move leads, and who may make it."""

    sources: frozenset[RunState]
    targets: frozenset[RunState]
    by: Mover


RULES: Final[Mapping[Move, Rule]] = {
    Move.CLAIM: Rule(
        sources=frozenset({RunState.WAITING}),
        targets=frozenset({RunState.RUNNING}),
        by=Mover.ENGINE,
    ),
    # The holder's lease is over: another one takes the run, and the crash is counted.
    Move.TAKE_OVER: Rule(
        sources=frozenset({RunState.RUNNING}),
        targets=frozenset({RunState.RUNNING}),
        by=Mover.ENGINE,
    ),
    Move.RENEW: Rule(
        sources=frozenset({RunState.RUNNING}),
        targets=frozenset({RunState.RUNNING}),
        by=Mover.ENGINE,
    ),
    Move.GIVE_BACK: Rule(
        sources=frozenset({RunState.RUNNING}),
        targets=frozenset({RunState.WAITING}),
        by=Mover.ENGINE,
    ),
    Move.FINISH: Rule(
        sources=frozenset({RunState.RUNNING}),
        targets=frozenset({RunState.PLANNED, RunState.NO_PLAN, RunState.FAILED}),
        by=Mover.ENGINE,
    ),
    # The deadline passed while the run waited.
    Move.EXPIRE: Rule(
        sources=frozenset({RunState.WAITING}),
        targets=frozenset({RunState.FAILED}),
        by=Mover.ENGINE,
    ),
    Move.CANCEL: Rule(
        sources=frozenset({RunState.WAITING, RunState.RUNNING}),
        targets=frozenset({RunState.CANCELLED}),
        by=Mover.CLIENT,
    ),
}


def may_move(source: RunState, target: RunState) -> bool:
    """Return whether any move leads from ``source`` to ``target``."""
    return any(source in rule.sources and target in rule.targets for rule in RULES.values())
