"""Relaxations of wide programs from few of their columns and limits, the others priced and added.

Most lanes are never near, and most limits never reached. What GLOP is shown starts from what every
item would do by itself; then all columns are priced with the dual values of what came out, and all
limits counted, and those that would pay or are broken are added, until none is. That is an optimum
of the whole relaxation, to GLOP's tolerances: nothing that decides is left out.
"""

from typing import Final

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.planning.coupled.linear_program import FloatArray, Relaxed, Rows, relaxed_optimum
from service.planning.coupled.program import CoupledProgram
from service.planning.model.arcs import MoneyArray
from service.planning.model.limits import NoFlowError
from service.planning.model.shared_limits import NO_LEAST, NO_MOST

# Below so many columns the whole program takes less time than choosing.
COLUMNS_MIN: Final = 20_000
# Columns into a place that are shown at first, and added to it in a round. Measured on 30 sites,
# 800 places, 5 items: hardly any was ever added (2026-12-01).
SHOWN: Final = 2
ADDED: Final = 3
# Columns into a place that whole plans are looked for among.
NEAR: Final = 6
ROUNDS_MAX: Final = 25
# A limit that is nearly reached where items do not care for it is felt as soon as they do.
ROOM_AT_FIRST: Final = 1.25
# What counts as paying, or as broken, of the largest cost and of a limit.
NEAR_NOTHING: Final = 1e-9


def priced_optimum(  # noqa: PLR0913 - a program is its columns
    program: CoupledProgram,
    costs: MoneyArray,
    capacity: IntArray,
    *,
    lower: IntArray,
    upper: IntArray,
    alone: IntArray,
    reduced: FloatArray,
) -> Relaxed | None:
    """Return an optimum of the relaxation; None where too few columns were found to have any.

    ``alone`` is the flow by column of all items by themselves at the same ``costs``, and
    ``reduced`` their reduced costs.
    """
    cost = np.asarray(costs, np.float64)
    shown = (alone > 0) | ~_is_lane(program)
    shown |= _nearest(program, reduced, shown, most=SHOWN)
    counted = program.numbers @ alone
    felt = _broken(counted * ROOM_AT_FIRST, lower, upper)
    # Rows of shortage are few, and caps where they count.
    felt[len(program.limits) :] = True
    size = float(np.abs(cost).max(initial=1.0))
    for _ in range(ROUNDS_MAX):
        found = _restricted(program, costs, capacity, lower, upper, shown, felt)
        if found is None:
            return None
        worth = cost - program.balance.T @ found.dual[: program.nodes]
        worth -= program.numbers.T @ found.dual[program.nodes :]
        paying = ~shown & (worth < -NEAR_NOTHING * size) & (capacity != 0)
        broken = _broken(program.numbers @ found.value, lower, upper) & ~felt
        if not paying.any() and not broken.any():
            return Relaxed(value=found.value, dual=found.dual, reduced=worth)
        shown |= paying & _nearest(program, worth, ~paying, most=ADDED)
        felt |= broken
    return None


def near_columns(program: CoupledProgram, relaxed: Relaxed) -> BoolArray | None:
    """Return the columns that a plan near the relaxation may use, None where all are few."""
    if relaxed.value.shape[0] < COLUMNS_MIN:
        return None
    used = (relaxed.value > 0) | ~_is_lane(program)
    return used | _nearest(program, relaxed.reduced, used, most=NEAR)


def _is_lane(program: CoupledProgram) -> BoolArray:
    """Return which columns are lanes."""
    return np.concatenate(
        [
            whole.kept < own.lanes.rows.shape[0]
            for own, whole in zip(program.items, program.contractions, strict=True)
        ]
    )


def _nearest(
    program: CoupledProgram, worth: FloatArray, passed: BoolArray, *, most: int
) -> BoolArray:
    """Return, of the columns into each place, the ``most`` of least ``worth``, but for passed ones.

    Columns into a root stand together as those of one place.
    """
    columns = np.flatnonzero(~passed)
    head = program.head[columns]
    order = columns[np.lexsort((columns, worth[columns], head))]
    ends = program.head[order]
    starts = np.flatnonzero(np.append(True, ends[1:] != ends[:-1])[: ends.shape[0]])
    place = np.arange(ends.shape[0]) - np.repeat(starts, np.diff(np.append(starts, ends.shape[0])))
    found = np.zeros(worth.shape[0], np.bool_)
    found[order[place < most]] = True
    return found


def _broken(sums: FloatArray, lower: IntArray, upper: IntArray) -> BoolArray:
    """Return which rows are above their most or below their least."""
    near = NEAR_NOTHING * np.maximum(1.0, np.abs(sums))
    above = (upper != NO_MOST) & (sums > upper + near)
    broken: BoolArray = above | ((lower != NO_LEAST) & (sums < lower - near))
    return broken


def _restricted(  # noqa: PLR0913, PLR0917 - a program is its columns
    program: CoupledProgram,
    costs: MoneyArray,
    capacity: IntArray,
    lower: IntArray,
    upper: IntArray,
    shown: BoolArray,
    felt: BoolArray,
) -> Relaxed | None:
    """Return an optimum over the shown columns and felt rows, laid out as of the whole program."""
    columns, limits = np.flatnonzero(shown), np.flatnonzero(felt)
    need = np.zeros(program.nodes, np.int64)
    rows = Rows.of(
        program.balance[:, columns],
        need,
        program.numbers[limits][:, columns],
        lower[limits],
        upper[limits],
    )
    try:
        part = relaxed_optimum(costs[columns], program.minimum[columns], capacity[columns], rows)
    except NoFlowError:
        return None
    value = np.zeros(shown.shape[0])
    value[columns] = part.value
    dual = np.zeros(program.nodes + felt.shape[0])
    dual[: program.nodes] = part.dual[: program.nodes]
    dual[program.nodes + limits] = part.dual[program.nodes :]
    return Relaxed(value=value, dual=dual, reduced=value)
