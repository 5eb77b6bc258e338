"""A relaxed plan put into whole steps, by programs over widening rings of columns around it.

To fix all columns but the fractional ones fails too often, and all columns at once are too many.
So a ring takes the fractional columns and, of every row that holds one, those that cost least to
move; all others are held. The next ring is several times as wide.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.planning.coupled.linear_program import FloatArray, Relaxed, Rows, whole_optimum
from service.planning.coupled.program import CoupledProgram
from service.planning.model.arcs import UNLIMITED, MoneyArray, product_total
from service.planning.model.shared_limits import NO_LEAST, NO_MOST

# Values of the relaxation that are this near to a whole number are taken for it; GLOP keeps bounds
# to a part in 10**8.
NEAR_WHOLE: Final = 1e-6
# How many columns of a row that holds a fractional one the first ring has, and how many more the
# next one.
RING_REACH: Final = 6
RING_GROWS: Final = 3
# Up to so many columns the search goes on until the plan is proved or all columns are free. Beyond,
# a plan that is known is taken: one by one items came to 3e-4 to 8e-4 above the bound, and a ring
# took 13 s to gain nothing (30 sites, 800 places, 5 items; SCIP of ortools 9.15.6755, 2026-12-01).
SMALL_COLUMNS: Final = 3000
# Search nodes times columns: some seconds for a ring at most, whatever its width, and the same on
# every machine.
NODE_COLUMNS_MAX: Final = 1_000_000
# How often a row is tightened where the engine's tolerance lets it be broken.
TIGHTENED_MAX: Final = 3


@dataclass(frozen=True, slots=True, kw_only=True)
class Task:
    """What is minimised over a program: ``objective`` by column, within bounds and rows.

    ``capacity`` is by column (``UNLIMITED``: none); ``lower`` and ``upper`` are of the program's
    ``numbers`` (``NO_LEAST``, ``NO_MOST``: none). ``bound`` is one of the objective that no plan
    comes below.
    """

    objective: MoneyArray
    capacity: IntArray
    lower: IntArray
    upper: IntArray
    bound: int


def whole_plan(
    program: CoupledProgram,
    task: Task,
    relaxed: Relaxed,
    *,
    known: Sequence[IntArray | None],
) -> IntArray | None:
    """Return whole steps by column, as cheap as the search finds; None if it finds no plan.

    ``known`` are plans in whole steps that may keep all rows; what is returned is no worse than
    any of them that does.
    """
    nearest = np.rint(relaxed.value)
    fractional = np.abs(relaxed.value - nearest) > NEAR_WHOLE
    base = nearest.astype(np.int64)
    best = None
    for plan in (*known, base):
        if plan is not None and _keeps(program, task, plan):
            best = _better(task, best, plan)
    columns = base.shape[0]
    reach = RING_REACH
    while not _good_enough(task, best, columns):
        ring = _ring(program, fractional, np.abs(relaxed.reduced), reach=reach)
        best = _better(task, best, _solved(program, task, base, ring))
        if ring.shape[0] == columns:
            break
        reach *= RING_GROWS
    return best


def _ring(
    program: CoupledProgram, fractional: BoolArray, reduced: FloatArray, *, reach: int
) -> IntArray:
    """Return the fractional columns and, of every row that holds one, the ``reach`` nearest.

    Those are the nearest that cost least to move. All columns once that is most of them.
    """
    columns = fractional.shape[0]
    chosen = fractional.copy()
    for matrix in (program.balance, program.numbers):
        row = np.repeat(np.arange(matrix.shape[0]), np.diff(matrix.indptr))
        holds = np.zeros(matrix.shape[0], np.bool_)
        holds[row[fractional[matrix.indices]]] = True
        held = np.flatnonzero(holds[row])
        held = held[np.lexsort((matrix.indices[held], reduced[matrix.indices[held]], row[held]))]
        rows = row[held]
        starts = np.flatnonzero(np.append(True, rows[1:] != rows[:-1])[: rows.shape[0]])
        place = np.arange(rows.shape[0]) - np.repeat(starts, np.diff(np.append(starts, len(rows))))
        chosen[matrix.indices[held[place < reach]]] = True
    if reach >= columns or 2 * int(chosen.sum()) >= columns:
        return np.arange(columns)
    return np.flatnonzero(chosen)


def _good_enough(task: Task, plan: IntArray | None, columns: int) -> bool:
    """Return whether the search may end with ``plan``."""
    if plan is None:
        return False
    return columns > SMALL_COLUMNS or product_total(task.objective, plan) <= task.bound


def _better(task: Task, former: IntArray | None, latter: IntArray | None) -> IntArray | None:
    """Return the better of two plans, the former where they are equal."""
    if former is None or latter is None:
        return latter if former is None else former
    costs = product_total(task.objective, former), product_total(task.objective, latter)
    return latter if costs[1] < costs[0] else former


def _solved(program: CoupledProgram, task: Task, base: IntArray, ring: IntArray) -> IntArray | None:
    """Return the best plan in which only the columns of ``ring`` leave ``base``."""
    held = base.copy()
    held[ring] = 0
    balance = program.balance[:, ring]
    numbers = program.numbers[:, ring]
    need = -(program.balance @ held)
    taken = program.numbers @ held
    in_balance, counted = (np.flatnonzero(np.diff(part.indptr) > 0) for part in (balance, numbers))
    lower, upper = task.lower.copy(), task.upper.copy()
    for _ in range(TIGHTENED_MAX):
        rows = Rows.of(
            balance[in_balance],
            need[in_balance],
            numbers[counted],
            np.where(lower == NO_LEAST, lower, lower - taken)[counted],
            np.where(upper == NO_MOST, upper, upper - taken)[counted],
        )
        answer = whole_optimum(
            task.objective[ring],
            program.minimum[ring],
            task.capacity[ring],
            rows,
            nodes_max=max(20, NODE_COLUMNS_MAX // ring.shape[0]),
        )
        if answer is None:
            return None
        plan = held.copy()
        plan[ring] = answer
        if _keeps(program, task, plan):
            return plan
        activity = program.numbers @ plan
        lower = np.where(activity < task.lower, lower + (task.lower - activity), lower)
        upper = np.where(activity > task.upper, upper - (activity - task.upper), upper)
    return None


def _keeps(program: CoupledProgram, task: Task, plan: IntArray) -> bool:
    """Return whether whole steps keep every bound, balance and row, exactly."""
    if (plan < program.minimum).any():
        return False
    if ((task.capacity != UNLIMITED) & (plan > task.capacity)).any():
        return False
    if (program.balance @ plan).any():
        return False
    activity = program.numbers @ plan
    return not ((activity < task.lower) | (activity > task.upper)).any()
