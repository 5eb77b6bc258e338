"""The same networks as bare minimum-cost-flow problems, which is what other solvers are given."""

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np

from service.network.columns import CodeArray, IntArray
from tests.benchmarks.instances import CENTS, UNLIMITED, Dense
from tests.factories import Arc

PROBLEM = "problem.npz"


@dataclass(frozen=True, slots=True, kw_only=True)
class Problem:
    """Arcs as columns; ``supply`` by node is positive where goods start, and sums to 0.

    The arcs from ``lanes`` on are no lanes: surplus that stays, and, where there is too little,
    shortage at ``weight`` a unit, more than any way round can save. Every arc has a capacity. Costs
    are whole: money times ``per_money``.
    """

    tail: CodeArray
    head: CodeArray
    capacity: IntArray
    cost: IntArray
    supply: IntArray
    lanes: int
    weight: int
    per_money: int

    @property
    def nodes(self) -> int:
        """Return the number of nodes."""
        return int(self.supply.shape[0])

    def objective(self, flow: IntArray) -> int:
        """Return the cost of ``flow``, exactly; raise ``ValueError`` where it is none.

        No overflow in the balance: all goods together are far below 2**62.
        """
        balance = self.supply.copy()
        np.subtract.at(balance, self.tail, flow)
        np.add.at(balance, self.head, flow)
        if balance.any() or (flow < 0).any() or (flow > self.capacity).any():
            raise ValueError("not a flow")
        used = np.flatnonzero(flow)
        return sum(
            amount * cost
            for amount, cost in zip(flow[used].tolist(), self.cost[used].tolist(), strict=True)
        )

    def write(self, path: Path) -> None:
        """Keep the problem as a NumPy archive."""
        np.savez(
            path,
            tail=self.tail,
            head=self.head,
            capacity=self.capacity,
            cost=self.cost,
            supply=self.supply,
            rest=np.array([self.lanes, self.weight, self.per_money]),
        )

    @staticmethod
    def read(path: Path) -> "Problem":
        """Read back what ``write`` kept."""
        with np.load(path) as kept:
            lanes, weight, per_money = kept["rest"].tolist()
            return Problem(
                tail=kept["tail"],
                head=kept["head"],
                capacity=kept["capacity"],
                cost=kept["cost"],
                supply=kept["supply"],
                lanes=lanes,
                weight=weight,
                per_money=per_money,
            )


def plan_objective(plan: Mapping[str, Any], problem: Path) -> int:
    """Return what a plan costs on the scale of the bare problem in a file, shortage and all."""
    with np.load(problem) as kept:
        _, weight, per_money = kept["rest"].tolist()
    money = Fraction(plan["total_cost"])
    short = sum((Fraction(row["quantity"]) for row in plan["shortages"]), Fraction(0))
    objective = money * per_money + short * weight
    if objective.denominator != 1 or Fraction(plan["certificate"]["gap"]) != 0:
        raise ValueError(f"the plan costs {money} and is short of {short}: not of this problem")
    return int(objective)


def dense_problem(network: Dense) -> Problem:
    """Return the arcs of a dense network, and a node for what stays or is missing."""
    warehouses, ship_tos = network.cost.shape
    wanted, there = int(network.demand.sum()), int(network.supply.sum())
    rest = warehouses + ship_tos
    stays = np.arange(warehouses)
    missing = np.arange(warehouses, rest) if there < wanted else np.arange(0)
    weight = (rest + 2) * int(network.cost.max()) + 1
    lane_capacity = network.capacity.ravel()
    return Problem(
        tail=_codes(np.repeat(stays, ship_tos), stays, np.full(missing.shape, rest)),
        head=_codes(
            np.tile(np.arange(warehouses, rest), warehouses),
            np.full(warehouses, rest),
            missing,
        ),
        capacity=np.concatenate(
            (
                np.where(lane_capacity == UNLIMITED, wanted, lane_capacity),
                network.supply,
                network.demand[missing - warehouses],
            )
        ),
        cost=np.concatenate(
            (
                network.cost.ravel(),
                np.zeros(warehouses, np.int64),
                np.full(missing.shape, weight, np.int64),
            )
        ),
        supply=np.concatenate((network.supply, -network.demand, [wanted - there])),
        lanes=warehouses * ship_tos,
        weight=weight,
        per_money=CENTS,
    )


def sparse_problem(supply: dict[str, int], demand: dict[str, int], arcs: list[Arc]) -> Problem:
    """Return the arcs of a network in which all supply leaves, as NETGEN makes them."""
    names = sorted({*supply, *demand, *(arc[0] for arc in arcs), *(arc[1] for arc in arcs)})
    number = {name: place for place, name in enumerate(names)}
    costs = np.array([int(arc[2]) for arc in arcs], np.int64)
    # No published network mixes both: what has no capacity could carry everything.
    most = sum(supply.values())
    return Problem(
        tail=_codes(np.array([number[arc[0]] for arc in arcs])),
        head=_codes(np.array([number[arc[1]] for arc in arcs])),
        capacity=np.array([most if arc[3] is None else int(arc[3]) for arc in arcs], np.int64),
        cost=costs,
        supply=np.array([supply.get(name, 0) - demand.get(name, 0) for name in names], np.int64),
        lanes=len(arcs),
        weight=(len(names) + 1) * int(costs.max()) + 1,
        per_money=1,
    )


def _codes(*parts: IntArray) -> CodeArray:
    """Return node numbers as the solvers take them."""
    return np.concatenate(parts).astype(np.int32)
