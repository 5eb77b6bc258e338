"""The legal moves of a run, against the states of the interface."""

import pytest

from service.runs.lifecycle import FINAL, RULES, Move, may_move
from service.runs.run import RunState

# From the description of the interface: waiting, running, then one of the four that are final.
LEGAL = {
    ("waiting", "running"),
    ("waiting", "failed"),
    ("waiting", "cancelled"),
    ("running", "running"),
    ("running", "waiting"),
    ("running", "planned"),
    ("running", "no_plan"),
    ("running", "failed"),
    ("running", "cancelled"),
}


def test_moves_are_those_of_the_interface_and_no_others() -> None:
    """Every pair of states is looked at, so that no move slips in."""
    pairs = {(a.value, b.value) for a in RunState for b in RunState if may_move(a, b)}

    assert pairs == LEGAL


@pytest.mark.parametrize("state", sorted(FINAL))
def test_nothing_leaves_a_final_state(state: RunState) -> None:
    """What was answered once stays the answer."""
    assert [target for target in RunState if may_move(state, target)] == []


def test_every_move_has_its_rule() -> None:
    """A move without one would fail where it is made, in the middle of a run."""
    assert set(RULES) == set(Move)
