"""One item solved: contracted, feasible, of least weighted cost, canonical, with prices."""

from dataclasses import dataclass
from typing import Any

import numpy as np

from service.network.columns import IntArray, Network
from service.planning.flow.canonical_plan import canonical_flow
from service.planning.flow.contraction import Contraction, contract
from service.planning.flow.forced_flow import contradiction
from service.planning.flow.tie_break import ItemTieBreak
from service.planning.model.arcs import ROOT, Kind, MoneyArray
from service.planning.model.item_network import ItemNetwork
from service.planning.model.limits import NoCirculationError, NoFlowError, SolverFaultError
from service.planning.wide.routes import Front, chosen_route


@dataclass(frozen=True, slots=True, kw_only=True)
class ItemFlow:
    """The plan of one item as flow: steps on every arc, and the price of every node.

    ``contraction`` is kept for questions that are asked of the plan later (reasons of shortages).
    ``reduced`` are the reduced costs of all arcs where items share limits: what an arc takes of
    them is paid for in it, and ``price`` is empty.
    """

    own: ItemNetwork
    contraction: Contraction
    flow: IntArray
    price: MoneyArray
    reduced: MoneyArray | None = None

    def amounts(self, kind: Kind) -> dict[int, int]:
        """Return the flow above 0 on the arcs of one kind, by subject."""
        if kind == Kind.LANE:
            lanes = np.flatnonzero(self.flow[: self.own.lanes.rows.shape[0]])
            on_lanes = zip(self.own.subject[lanes].tolist(), self.flow[lanes].tolist(), strict=True)
            if self.own.lanes.first is None:
                return dict(on_lanes)
            sums: dict[int, int] = {}
            for lane, steps in on_lanes:
                sums[lane] = sums.get(lane, 0) + steps
            return sums
        arcs = self.own.of_kind(kind)
        carried = self.flow[arcs]
        used = carried != 0
        return dict(zip(self.own.subject[arcs[used]].tolist(), carried[used].tolist(), strict=True))


def solve_item(network: Network, own: ItemNetwork, *, front: Front = chosen_route) -> ItemFlow:
    """Return the canonical plan of one item; it does not depend on the route that ``front`` takes.

    Raises
    ------
    NoCirculationError
        Minimums and capacities contradict each other; it holds the set that shows it.
    NumbersTooLargeError, SolverFaultError
        As ``least_cost_flow``.
    """
    whole = contract(own.arcs, nodes=own.node_count, lanes=own.lanes.rows.shape[0])
    weighted = own.weighted()
    route = front(own, whole, weighted)
    try:
        optimum = route.optimum()
    except NoFlowError as none:
        found = contradiction(own.arcs, nodes=own.node_count)
        if found is None:
            raise SolverFaultError("the solver found no flow where there is one") from none
        places, forced_out, can_enter = found
        raise NoCirculationError(places, forced_out=forced_out, can_enter=can_enter) from none
    settled = canonical_flow(
        whole,
        optimum.arcs,
        optimum.flow,
        optimum.price,
        tie_break=ItemTieBreak(network=network, own=own),
        at=optimum.at,
    )
    prices: Any = whole.prices(route.prices(optimum, settled), weighted)
    return ItemFlow(
        own=own,
        contraction=whole,
        flow=whole.flow(settled, at=optimum.at),
        price=prices - prices[ROOT],
    )
