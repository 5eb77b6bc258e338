"""All items solved: by themselves, or in circles of items that share limits."""

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from service.planning.coupled.contradiction import Contradiction, ContradictionError
from service.planning.coupled.items import CoupledPlan, solve_coupled
from service.planning.flow.contraction import contract
from service.planning.flow.forced_flow import contradiction
from service.planning.model.compile import Compiled
from service.planning.model.item_network import ItemNetwork
from service.planning.model.limits import NoCirculationError
from service.planning.solve import ItemFlow

Cuts = list[tuple[ItemNetwork, NoCirculationError]]


@dataclass(frozen=True, slots=True, kw_only=True)
class Why:
    """Why there is no plan: items without any flow, and circles whose limits contradict."""

    cuts: Cuts
    contradictions: tuple[Contradiction, ...]

    def __bool__(self) -> bool:
        """Return whether there is no plan."""
        return bool(self.cuts or self.contradictions)


@dataclass(frozen=True, slots=True, kw_only=True)
class Solution:
    """The plan of every item, and how those that share limits were planned together."""

    flows: tuple[ItemFlow, ...]
    coupled: tuple[CoupledPlan, ...]

    @property
    def proved(self) -> bool:
        """Whether every step achieved its bound."""
        steps = (step for made in self.coupled for step in made.steps)
        return all(step.achieved == step.bound for step in steps)

    def gap(self, scale: Fraction) -> Fraction:
        """Return what the cost is above its bound, in money; ``scale`` is that of the run."""
        last = [made.steps[-1] for made in self.coupled]
        return sum((step.achieved - step.bound for step in last), 0) / scale


def solve_all(
    compiled: Compiled, solve_one: Callable[[ItemNetwork], ItemFlow]
) -> tuple[Solution, Why]:
    """Solve all items; return what was found, and why there is no plan where there is none.

    ``solve_one`` plans an item that shares nothing; it raises what ``solve_item`` raises. Where
    there is a contradiction the solution is not whole, and nobody needs it.
    """
    network, shared = compiled.network, compiled.shared
    in_circles = {item for circle in compiled.circles for item in circle}
    flows: dict[int, ItemFlow] = {}
    cuts: Cuts = []
    for position, own in enumerate(compiled.items):
        if position in in_circles:
            continue
        try:
            flows[position] = solve_one(own)
        except NoCirculationError as cut:
            cuts.append((own, cut))
    coupled: list[CoupledPlan] = []
    contradictions: list[Contradiction] = []
    for circle in compiled.circles:
        assert shared is not None  # noqa: S101 - else there are no circles
        items = [compiled.items[position] for position in circle]
        touched = shared.touched()[list(circle)].any(axis=0)
        try:
            made = solve_coupled(network, items, shared.of(circle, np.flatnonzero(touched)))
        except ContradictionError as error:
            alone = [(own, why) for own in items if (why := _alone(own)) is not None]
            cuts += alone
            contradictions += [] if alone else [error.found]
            continue
        coupled.append(made)
        flows |= dict(zip(circle, _item_flows(items, made), strict=True))
    return (
        Solution(flows=tuple(flows[at] for at in sorted(flows)), coupled=tuple(coupled)),
        Why(cuts=cuts, contradictions=tuple(contradictions)),
    )


def _alone(own: ItemNetwork) -> NoCirculationError | None:
    """Return why an item by itself has no flow, None where it has one."""
    found = contradiction(own.arcs, nodes=own.node_count)
    if found is None:
        return None
    places, forced_out, can_enter = found
    return NoCirculationError(places, forced_out=forced_out, can_enter=can_enter)


def _item_flows(items: list[ItemNetwork], made: CoupledPlan) -> list[ItemFlow]:
    """Return the plan of each item of a circle as that of an item."""
    proof = made.steps[-1].proof
    assert proof is not None  # noqa: S101 - the step of cost always has one
    return [
        ItemFlow(
            own=own,
            contraction=contract(own.arcs, nodes=own.node_count, lanes=own.lanes.rows.shape[0]),
            flow=flow,
            price=np.zeros(0, np.int64),
            reduced=reduced,
        )
        for own, flow, reduced in zip(items, made.flows, proof.reduced, strict=True)
    ]
