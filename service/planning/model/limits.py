"""What planning can end with besides a plan."""

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from service.network.columns import BoolArray


class NumbersTooLargeError(Exception):
    """A quantity leaves the range in which the plan would be exact; the message names it."""


class NoFlowError(Exception):
    """Minimums and capacities contradict each other: no flow meets both."""


class SolverFaultError(Exception):
    """A solver answered what it must not; our mistake, never the client's."""


class NoCirculationError(Exception):
    """No plan: what must leave ``places`` is more than what can enter them.

    ``places`` is true for the nodes of the set X (Hoffman 1960); ``forced_out`` and ``can_enter``
    are steps.
    """

    def __init__(self, places: "BoolArray", *, forced_out: int, can_enter: int) -> None:
        """Keep the set and both sums."""
        super().__init__(f"{forced_out} must leave, only {can_enter} can come in")
        self.places = places
        self.forced_out = forced_out
        self.can_enter = can_enter
