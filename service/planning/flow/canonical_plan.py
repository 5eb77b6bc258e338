"""One plan for one network: ties between plans of least cost, broken by what things are called."""

from collections.abc import Callable

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from service.network.columns import BoolArray, IntArray
from service.planning.flow.contraction import Contraction
from service.planning.flow.min_cost_flow import least_cost_flow, node_balance
from service.planning.flow.prices import reduced_cost
from service.planning.model.arcs import Arcs, MoneyArray

# Trees hang off the loops that ties consist of; each sweep takes off their outermost arcs. Arcs
# that stay after the last sweep cost time and change nothing.
SWEEPS_MAX = 200

TieBreak = Callable[[IntArray], tuple[IntArray, IntArray]]


def tied_arcs(arcs: Arcs, flow: IntArray, price: MoneyArray, *, nodes: int) -> IntArray:
    """Return the positions of arcs that hold all differences between flows of least cost.

    In the residual network at reduced cost 0 the flow of an arc can differ only if both its ends
    lie in one strongly connected component; of these, arcs in hanging trees are left out, for a
    bridge cannot differ (Boesch and Tindell 1980). The set does not depend on which flow of least
    cost and which prices are given: besides arcs that differ it holds only bridges strictly
    between their bounds, the same ones in every flow of least cost.
    """
    even = reduced_cost(arcs, price) == 0
    more = even & arcs.can_take_more(flow)
    less = even & arcs.can_give_up(flow)
    tails = np.concatenate((arcs.tail[more], arcs.head[less]))
    heads = np.concatenate((arcs.head[more], arcs.tail[less]))
    graph = coo_array(
        (np.ones(tails.shape[0], np.int8), (tails, heads)), shape=(nodes, nodes)
    ).tocsr()
    _, component = connected_components(graph, directed=True, connection="strong")
    inside = (more | less) & (component[arcs.tail] == component[arcs.head])
    tied = np.flatnonzero(inside & (arcs.tail != arcs.head))
    for _ in range(SWEEPS_MAX):
        ends = np.bincount(arcs.tail[tied], minlength=nodes)
        ends += np.bincount(arcs.head[tied], minlength=nodes)
        held: BoolArray = (ends[arcs.tail[tied]] > 1) & (ends[arcs.head[tied]] > 1)
        if held.all():
            break
        tied = tied[held]
    return tied


def canonical_flow(  # noqa: PLR0913 - an optimum is many columns
    contraction: Contraction,
    arcs: Arcs,
    flow: IntArray,
    price: MoneyArray,
    *,
    tie_break: TieBreak,
    at: IntArray | None = None,
) -> IntArray:
    """Return the one flow of least cost that also has the least tie weights, shape (arcs,).

    ``arcs`` are those of ``contraction`` at their cost, ``flow`` and ``price`` any optimum on
    them; with ``at`` only those at these original positions, among them all that have a reduced
    cost of 0. ``tie_break`` takes positions of original arcs and returns their tie weights and
    their rank in the order (kind, id). All other flow is kept; the tied arcs are solved once more,
    in that order, so that neither the order of the arrays nor the way to the optimum leaves a
    trace.
    """
    tied = tied_arcs(arcs, flow, price, nodes=contraction.nodes)
    if tied.shape[0] == 0:
        return flow
    merged_over = [step.arc for step in contraction.rounds]
    tied_at = (contraction.kept if at is None else at)[tied]
    original = np.concatenate((tied_at, *merged_over))
    weight, rank = tie_break(original)
    weights = np.zeros(len(contraction.original), np.int64)
    weights[original] = weight
    offset = contraction.offsets(weights)
    whole = contraction.original
    secondary = weights[tied_at] + (offset[whole.tail[tied_at]] - offset[whole.head[tied_at]])
    order = np.argsort(rank[: tied.shape[0]], kind="stable")
    tied, secondary = tied[order], secondary[order]
    part = arcs.at(tied)
    places, ends = np.unique(np.concatenate((part.tail, part.head)), return_inverse=True)
    small = Arcs(
        tail=ends[: tied.shape[0]],
        head=ends[tied.shape[0] :],
        minimum=part.minimum,
        capacity=part.capacity,
        cost=secondary,
    )
    settled = flow.copy()
    count = int(places.shape[0])
    balance = node_balance(small, flow[tied], nodes=count)
    settled[tied] = least_cost_flow(small, nodes=count, balance=balance)
    return settled
