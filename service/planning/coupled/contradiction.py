"""Why items that share limits have no plan: limits that contradict each other, none too many.

The set is irreducible: without any one of its limits and forced quantities there would be a plan.
Prices of the limits prove it: at these prices the items cost more than the limits are worth,
although nothing else costs anything (the lemma of Farkas, in the form of a bound above 0).
"""

from dataclasses import dataclass

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.planning.coupled.certified_bound import CertifiedBound, certified_bound
from service.planning.coupled.linear_program import Rows, least_violation
from service.planning.coupled.program import CoupledProgram
from service.planning.model.limits import SolverFaultError
from service.planning.model.shared_limits import NO_LEAST, NO_MOST, SharedLimits

# What GLOP's tolerances could add up to; a step that does not fit is far more.
NEAR_NOTHING = 1e-6
# So many limits and forced quantities are tried one by one.
TRIED_MAX = 200


@dataclass(frozen=True, slots=True, kw_only=True)
class Contradiction:
    """Limits of a circle that leave no plan.

    ``rows`` are positions in ``limits``, ``forced`` the lanes (item of the circle, position of the
    arc) whose least quantity has a part in it. ``proof`` is None where goods that could be divided
    would have a plan, so that only whole steps have none; then the rows are those that a plan of
    divided goods reaches.
    """

    items: tuple[int, ...]
    limits: SharedLimits
    rows: IntArray
    forced: tuple[tuple[int, int], ...]
    proof: CertifiedBound | None


class ContradictionError(Exception):
    """Items that share limits have no plan."""

    def __init__(self, found: Contradiction) -> None:
        """Keep what was found."""
        super().__init__("limits that items share contradict each other")
        self.found = found


def contradiction_of(program: CoupledProgram) -> Contradiction | None:
    """Return an irreducible contradiction, None where goods that can be divided have a plan.

    The network of each item by itself has a flow; else its contradiction is that of one item.
    """
    search = _Search(program)
    limits = np.ones(len(program.limits), np.bool_)
    price = search.prices(limits, program.minimum)
    if price is None:
        return None
    # What has no price takes no part in the contradiction that was found.
    limits = np.abs(price) > NEAR_NOTHING
    minimum = program.minimum.copy()
    forced = search.forced_lanes()
    for row in np.flatnonzero(limits)[:TRIED_MAX].tolist():
        limits[row] = False
        limits[row] = search.prices(limits, minimum) is None
    kept = []
    for item, arc, column in forced[:TRIED_MAX]:
        least, minimum[column] = minimum[column], 0
        if search.prices(limits, minimum) is None:
            minimum[column] = least
            kept.append((item, arc))
    return Contradiction(
        items=tuple(own.item for own in program.items),
        limits=program.limits,
        rows=np.flatnonzero(limits),
        forced=tuple(kept),
        proof=search.proof(limits),
    )


class _Search:
    """Asks which parts of a program contradict each other."""

    def __init__(self, program: CoupledProgram) -> None:
        """Prepare the rows once."""
        self._program = program
        self._need = np.zeros(program.nodes, np.int64)
        self._levels = len(program.priorities)

    def prices(self, limits: BoolArray, minimum: IntArray) -> list[float] | None:
        """Return prices of the limits that show a contradiction, None where there is none."""
        program = self._program
        lower, upper = self._within(limits)
        rows = Rows.of(program.balance, self._need, program.numbers, lower, upper)
        violation, dual = least_violation(minimum, program.capacity, rows, places=program.nodes)
        if violation <= NEAR_NOTHING:
            return None
        return [-value for value in dual[: len(program.limits)].tolist()]

    def proof(self, limits: BoolArray) -> CertifiedBound:
        """Return the exact proof that limits contradict each other."""
        program = self._program
        price = self.prices(limits, program.minimum)
        if price is None:
            raise SolverFaultError("what contradicted itself does so no longer")
        lower, upper = self._within(limits)
        found = certified_bound(
            program.items,
            [np.zeros(len(own.arcs), np.int64) for own in program.items],
            program.limits.of_item,
            lower=lower[: len(program.limits)],
            upper=upper[: len(program.limits)],
            price=price,
        )
        if found.value <= 0:
            raise SolverFaultError("the prices of a contradiction do not prove it")
        return found

    def forced_lanes(self) -> list[tuple[int, int, int]]:
        """Return (item, arc, column) of the lanes with a least quantity."""
        program = self._program
        found = []
        for at, (own, whole) in enumerate(zip(program.items, program.contractions, strict=True)):
            lanes = own.lanes.rows.shape[0]
            columns = np.flatnonzero((whole.kept < lanes) & (own.arcs.minimum[whole.kept] > 0))
            found += [
                (at, int(whole.kept[column]), int(program.first[at]) + column)
                for column in columns.tolist()
            ]
        return found

    def _within(self, limits: BoolArray) -> tuple[IntArray, IntArray]:
        """Return lower and upper sides of the rows in which only some limits count."""
        own = self._program.limits
        free = np.zeros(self._levels, np.int64)
        return (
            np.concatenate((np.where(limits, own.lower, NO_LEAST), free + NO_LEAST)),
            np.concatenate((np.where(limits, own.upper, NO_MOST), free + NO_MOST)),
        )
