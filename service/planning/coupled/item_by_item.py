"""A plan in whole steps by one item after the other, each an exact flow in what the others leave.

Given what all other items take of the shared limits, what one item may still take is a capacity on
a lane, or on the arc of a site: a network again, whose flows are whole. Limits that no one arc
stands for are not looked at here; who calls sees whether the plan keeps them.
"""

from dataclasses import replace
from typing import Final

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.planning.coupled.certified_bound import least_cost_alone
from service.planning.coupled.linear_program import FloatArray
from service.planning.coupled.program import CoupledProgram, shut
from service.planning.model.arcs import SAFE, UNLIMITED
from service.planning.model.item_network import ItemNetwork
from service.planning.model.limits import NoFlowError
from service.planning.model.shared_limits import NO_LEAST, NO_MOST, SharedLimits, arc_of_site

# The first round starts from the shares of the relaxation, the others from whole plans.
ROUNDS: Final = 2


def plan_item_by_item(
    program: CoupledProgram, shares: FloatArray, *, closed: BoolArray, near: BoolArray | None = None
) -> list[IntArray] | None:
    """Return flows of all items that keep the limits which single arcs stand for, if found.

    ``shares`` is the relaxation by column; ``closed`` are the priorities that must not be short.
    Only columns that are ``near`` carry anything (None: all may).
    """
    limits = program.limits
    flows = program.shares(shares)
    taken = [own @ flow for own, flow in zip(limits.of_item, flows, strict=True)]
    heaviest = sorted(range(len(program.items)), key=lambda at: (-_weight(limits, at), at))
    whole: list[IntArray] = [np.zeros(0, np.int64)] * len(program.items)
    for _ in range(ROUNDS):
        for at in heaviest:
            others = np.zeros(len(limits))
            for other in range(len(taken)):
                if other != at:
                    others += taken[other]
            own = shut(program.items[at], closed, program.priorities)
            own = own if near is None else _only(own, program, at, near)
            left = _within(own, limits, at, others)
            if left is None:
                return None
            try:
                flow = least_cost_alone(left, left.weighted())
            except NoFlowError:
                return None
            whole[at] = flow
            taken[at] = (limits.of_item[at] @ flow).astype(np.float64)
    return whole


def _only(own: ItemNetwork, program: CoupledProgram, at: int, near: BoolArray) -> ItemNetwork:
    """Return an item that uses only near columns, and what must carry something."""
    kept = program.contractions[at].kept
    far = kept[~near[program.first[at] : program.first[at + 1]]]
    far = far[own.arcs.minimum[far] == 0]
    capacity = own.arcs.capacity.copy()
    capacity[far] = 0
    return replace(own, arcs=replace(own.arcs, capacity=capacity))


def _weight(limits: SharedLimits, at: int) -> int:
    """Return the largest number that a step of an item counts: coarse items go first."""
    data = limits.of_item[at].data
    return int(np.abs(data).max()) if data.shape[0] else 0


def _within(
    own: ItemNetwork, limits: SharedLimits, at: int, others: FloatArray
) -> ItemNetwork | None:
    """Return an item whose arcs carry only what ``others`` leave of each limit."""
    minimum, capacity = own.arcs.minimum.copy(), own.arcs.capacity.copy()
    rows = limits.of_item[at]
    counts = np.diff(rows.indptr)
    arc = np.full(len(limits), -1, np.int64)
    number = np.ones(len(limits), np.int64)
    lone = np.flatnonzero(counts == 1)
    arc[lone] = rows.indices[rows.indptr[lone]]
    number[lone] = rows.data[rows.indptr[lone]]
    for row in np.flatnonzero(counts > 1).tolist():
        found = arc_of_site(own, limits.names[row])
        if found is not None:
            arc[row] = found
            number[row] = rows.data[rows.indptr[row]]
    # A part in a million of a step is what the relaxation may be off by.
    held = np.flatnonzero((arc >= 0) & (number > 0))
    most = np.floor((limits.upper[held] - others[held]) / number[held] + 1e-6)
    least = np.ceil((limits.lower[held] - others[held]) / number[held] - 1e-6)
    above = np.flatnonzero(limits.upper[held] != NO_MOST)
    cut = np.full(capacity.shape[0], SAFE, np.int64)
    np.minimum.at(cut, arc[held[above]], np.maximum(most[above], 0).astype(np.int64))
    capacity = np.where(capacity == UNLIMITED, cut, np.minimum(capacity, cut))
    capacity[capacity == SAFE] = UNLIMITED
    below = np.flatnonzero(limits.lower[held] != NO_LEAST)
    np.maximum.at(minimum, arc[held[below]], np.maximum(least[below], 0).astype(np.int64))
    if ((capacity != UNLIMITED) & (minimum > capacity)).any():
        return None
    return replace(own, arcs=replace(own.arcs, minimum=minimum, capacity=capacity))
