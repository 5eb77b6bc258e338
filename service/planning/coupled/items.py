"""Items that share limits planned together: shortage by priority, then cost, each step certified.

What a step achieved in whole steps, never the value of its relaxation, is the cap of the next.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from service.network.columns import BoolArray, IntArray, Network
from service.planning.coupled.certified_bound import CertifiedBound, certified_bound, least_cost
from service.planning.coupled.contradiction import (
    Contradiction,
    ContradictionError,
    contradiction_of,
)
from service.planning.coupled.item_by_item import plan_item_by_item
from service.planning.coupled.linear_program import Relaxed, Rows, relaxed_optimum
from service.planning.coupled.priced_columns import COLUMNS_MIN, near_columns, priced_optimum
from service.planning.coupled.program import (
    CoupledProgram,
    ShortageGrid,
    coupled_program,
    shortage_grid,
    shut,
)
from service.planning.coupled.whole_steps import Task, whole_plan
from service.planning.flow.prices import reduced_cost
from service.planning.model.arcs import MoneyArray, product_total
from service.planning.model.item_network import ItemNetwork
from service.planning.model.limits import NoFlowError, SolverFaultError
from service.planning.model.shared_limits import NO_LEAST, NO_MOST, SharedLimits


class _NoPlanError(Exception):
    """A step has no plan: none at all, or (``relaxed``) none in whole steps was found."""

    def __init__(self, *, relaxed: Relaxed | None) -> None:
        """Keep the plan of divided goods, if there is one."""
        super().__init__("no plan keeps all shared limits")
        self.relaxed = relaxed


@dataclass(frozen=True, slots=True, kw_only=True)
class CoupledStep:
    """One step of what is minimised: shortage of a priority, or (``priority`` None) cost.

    ``achieved`` and ``bound`` are whole numbers: of the shortage's grain, or of scaled money.
    ``proof`` is None where a bound of 0 needs none. ``caps`` are the multipliers of what the
    former priorities achieved, by priority, in the whole numbers of the proof.
    """

    priority: int | None
    achieved: int
    bound: int
    proof: CertifiedBound | None
    caps: tuple[int, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class CoupledPlan:
    """The plan of items that share ``limits``: flow on every arc of each, and the steps."""

    items: tuple[int, ...]
    limits: SharedLimits
    grid: ShortageGrid
    flows: tuple[IntArray, ...]
    steps: tuple[CoupledStep, ...]


def solve_coupled(
    network: Network, items: Sequence[ItemNetwork], limits: SharedLimits
) -> CoupledPlan:
    """Return the plan of ``items``, whose rows in ``limits`` are in the same order.

    Raises
    ------
    ContradictionError
        There is none; no item by itself contradicts itself.
    NumbersTooLargeError, SolverFaultError
        As ``exact_flow``.
    """
    program = coupled_program(items, limits, shortage_grid(network, items))
    try:
        return _Ladder(program).climb()
    except _NoPlanError as none:
        try:
            found = contradiction_of(program)
        except NoFlowError:
            # An item by itself has none: whoever asked looks at the items one by one.
            found = None
        if found is None:
            found = _in_whole_steps(program, none.relaxed)
        raise ContradictionError(found) from none


def _in_whole_steps(program: CoupledProgram, relaxed: Relaxed | None) -> Contradiction:
    """Return what leaves divided goods a plan, but none in whole steps."""
    limits = program.limits
    reached = np.ones(len(limits), np.bool_)
    if relaxed is not None:
        sums = (program.numbers @ relaxed.value)[: len(limits)]
        near = np.maximum(1.0, np.abs(sums)) * 1e-6
        reached = (np.abs(sums - limits.upper) < near) | (np.abs(sums - limits.lower) < near)
    return Contradiction(
        items=tuple(own.item for own in program.items),
        limits=limits,
        rows=np.flatnonzero(reached),
        forced=(),
        proof=None,
    )


class _Ladder:
    """Climbs from step to step."""

    def __init__(self, program: CoupledProgram) -> None:
        """Start with nothing achieved."""
        self._program = program
        self._levels = len(program.priorities)
        self._caps: list[int | None] = [None] * self._levels
        self._steps: list[CoupledStep] = []
        self._plan: IntArray | None = None

    def climb(self) -> CoupledPlan:
        """Take all steps."""
        program = self._program
        if not self._without_shortage():
            for level in range(self._levels):
                self._least_shortage(level)
            self._least_cost()
        assert self._plan is not None  # noqa: S101 - a step without a plan raises
        return CoupledPlan(
            items=tuple(own.item for own in program.items),
            limits=program.limits,
            grid=program.grid,
            flows=tuple(program.flows(self._plan)),
            steps=tuple(self._steps),
        )

    def _without_shortage(self) -> bool:
        """Try to serve all priorities in full, which is often possible and takes one step."""
        if not self._can_be_short().any():
            return False
        caps, self._caps = self._caps, [0] * self._levels
        try:
            self._least_cost()
        except _NoPlanError:
            self._caps = caps
            return False
        self._steps[:0] = [
            CoupledStep(priority=priority, achieved=0, bound=0, proof=None, caps=())
            for priority in self._program.priorities
        ]
        return True

    def _can_be_short(self) -> BoolArray:
        """Return which priorities can be short at all."""
        found = np.zeros(self._levels, np.bool_)
        rank = self._program.rank
        found[rank[rank >= 0]] = True
        return found

    def _least_shortage(self, level: int) -> None:
        """Make the shortage of one priority as small as it can be."""
        program = self._program
        objective = []
        for own, number in zip(program.items, program.grid.number, strict=True):
            arcs, ranks = own.ranked_shortages()
            cost = np.zeros(len(own.arcs), np.int64)
            levels = np.searchsorted(program.priorities, np.array(own.priorities, np.int64))
            cost[arcs[levels[ranks] == level]] = number
            objective.append(cost)
        if not any(cost.any() for cost in objective):
            step = CoupledStep(
                priority=program.priorities[level], achieved=0, bound=0, proof=None, caps=()
            )
        else:
            step = self._step(objective, priority=program.priorities[level])
        self._steps.append(step)
        self._caps[level] = step.achieved

    def _least_cost(self) -> None:
        """Make the cost as small as it can be."""
        objective = [own.arcs.cost for own in self._program.items]
        self._steps.append(self._step(objective, priority=None))

    def _step(self, objective: Sequence[MoneyArray], *, priority: int | None) -> CoupledStep:
        """Minimise one objective over all that the steps before it leave."""
        program = self._program
        closed = np.array([cap == 0 for cap in self._caps], np.bool_)
        costs = program.columns(objective)
        # The last element answers for columns that are no shortage.
        held = np.append(closed, [False])[program.rank]
        capacity = np.where(held, 0, program.capacity)
        caps = [cap or NO_MOST for cap in self._caps]
        lower = np.concatenate((program.limits.lower, np.full(self._levels, NO_LEAST)))
        upper = np.concatenate((program.limits.upper, np.array(caps, np.int64)))
        relaxed = self._priced(objective, costs, capacity, closed, lower=lower, upper=upper)
        if relaxed is None:
            relaxed = self._relaxed(costs, capacity, lower, upper)
        bound = self._bound(objective, relaxed, closed, lower=lower, upper=upper)
        task = Task(
            objective=costs,
            capacity=capacity,
            lower=lower,
            upper=upper,
            bound=bound.rounded_up(),
        )
        near = near_columns(program, relaxed)
        flows = plan_item_by_item(program, relaxed.value, closed=closed, near=near)
        if flows is None and near is not None:
            flows = plan_item_by_item(program, relaxed.value, closed=closed)
        found = None if flows is None else program.on_columns(flows)
        plan = whole_plan(program, task, relaxed, known=(self._plan, found))
        if plan is None:
            raise _NoPlanError(relaxed=relaxed)
        self._plan = plan
        trivial = priority is not None and bound.rounded_up() <= 0
        return CoupledStep(
            priority=priority,
            achieved=product_total(costs, plan),
            bound=0 if trivial else bound.rounded_up(),
            proof=None
            if trivial
            else replace(bound, multiplier=bound.multiplier[: len(program.limits)]),
            caps=() if trivial else self._cap_prices(objective, bound, closed),
        )

    def _priced(  # noqa: PLR0913 - a step of a program in parts
        self,
        objective: Sequence[MoneyArray],
        costs: MoneyArray,
        capacity: IntArray,
        closed: BoolArray,
        *,
        lower: IntArray,
        upper: IntArray,
    ) -> Relaxed | None:
        """Return an optimum of the relaxation of a wide program, None where it is not wide."""
        program = self._program
        if costs.shape[0] < COLUMNS_MIN:
            return None
        flows, reduced = [], []
        try:
            for own, cost in zip(program.items, objective, strict=True):
                alone = shut(own, closed, program.priorities)
                flow, price = least_cost(alone, cost)
                flows.append(flow)
                reduced.append(reduced_cost(alone.arcs.with_cost(cost), price))
        except (NoFlowError, SolverFaultError):
            return None
        return priced_optimum(
            program,
            costs,
            capacity,
            lower=lower,
            upper=upper,
            alone=program.on_columns(flows),
            reduced=program.on_columns(reduced).astype(np.float64),
        )

    def _relaxed(
        self, costs: MoneyArray, capacity: IntArray, lower: IntArray, upper: IntArray
    ) -> Relaxed:
        """Return an optimum of the relaxation."""
        program = self._program
        need = np.zeros(program.nodes, np.int64)
        rows = Rows.of(program.balance, need, program.numbers, lower, upper)
        try:
            return relaxed_optimum(costs, program.minimum, capacity, rows)
        except NoFlowError:
            raise _NoPlanError(relaxed=None) from None

    def _bound(
        self,
        objective: Sequence[MoneyArray],
        relaxed: Relaxed,
        closed: BoolArray,
        *,
        lower: IntArray,
        upper: IntArray,
    ) -> CertifiedBound:
        """Return the exact bound at the prices of the relaxation."""
        program = self._program
        # A dual value is what one more of a row's right hand side adds to the least cost.
        price = [-value for value in relaxed.dual[program.nodes :].tolist()]
        items = [shut(own, closed, program.priorities) for own in program.items]
        numbers = program.numbers_by_item()
        try:
            return certified_bound(items, objective, numbers, lower=lower, upper=upper, price=price)
        except SolverFaultError:
            # Paid for moving, goods could go round for a gain without end: bounds without that.
            price = [max(worth, 0.0) for worth in price]
            return certified_bound(items, objective, numbers, lower=lower, upper=upper, price=price)

    def _cap_prices(
        self, objective: Sequence[MoneyArray], bound: CertifiedBound, closed: BoolArray
    ) -> tuple[int, ...]:
        """Return the price of each former priority's shortage.

        Where nothing may be short any price holds that keeps every shortage from paying.
        """
        program = self._program
        found = list(bound.multiplier[len(program.limits) :])
        for own, cost, price, number in zip(
            program.items, objective, bound.prices, program.grid.number, strict=True
        ):
            arcs, ranks = own.ranked_shortages()
            for arc, rank in zip(arcs.tolist(), ranks.tolist(), strict=True):
                level = program.priorities.index(own.priorities[rank])
                if not closed[level]:
                    continue
                head = int(own.arcs.head[arc])
                gain = int(price[head]) - int(cost[arc]) * bound.fineness
                found[level] = max(found[level], -(-gain // number))
        return tuple(found)
