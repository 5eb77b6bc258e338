"""An exact lower bound from prices of shared limits: each item by itself at those prices.

For any prices of the right sign, no plan costs less than what the items cost one by one with what
they take of the limits paid for, less what the limits are worth (Lagrangian duality; Ahuja,
Magnanti and Orlin, *Network Flows*, 1993, section 16.2).
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from service.network.columns import IntArray
from service.planning.flow.contraction import contract
from service.planning.flow.min_cost_flow import cost_limit
from service.planning.flow.prices import reduced_cost
from service.planning.model.arcs import (
    ROOT,
    SAFE,
    MoneyArray,
    largest,
    product_total,
    widened,
)
from service.planning.model.item_network import ItemNetwork
from service.planning.model.shared_limits import NO_LEAST, NO_MOST, Coefficients
from service.planning.wide.routes import chosen_route

# Prices are rounded to at most so many decimals of what the objective counts in.
FINE_DECIMALS = 12


@dataclass(frozen=True, slots=True, kw_only=True)
class CertifiedBound:
    """A bound, and the prices that prove it.

    ``value`` and all prices are in whole numbers of which ``fineness`` make one of the objective.
    ``multiplier``, one for each row, is above 0 where its upper side counts, below 0 where its
    lower one does. ``reduced`` are the reduced costs of all arcs, limits paid for.
    """

    fineness: int
    value: int
    multiplier: tuple[int, ...]
    prices: tuple[MoneyArray, ...]
    reduced: tuple[MoneyArray, ...]

    def rounded_up(self) -> int:
        """Return the least whole objective that is not below the bound."""
        return -(-self.value // self.fineness)


def certified_bound(  # noqa: PLR0913 - a program in parts
    items: Sequence[ItemNetwork],
    objective: Sequence[MoneyArray],
    rows: Sequence[Coefficients],
    *,
    lower: IntArray,
    upper: IntArray,
    price: Sequence[float],
) -> CertifiedBound:
    """Return the bound of about the given ``price`` of each row, in the objective's whole numbers.

    ``objective`` and ``rows`` are by item, over its arcs. ``lower`` and ``upper`` are of shape
    (rows,), ``NO_LEAST`` and ``NO_MOST`` being none.

    Raises what ``exact_flow`` raises; ``SolverFaultError`` where goods could go round for less
    than nothing at these prices.
    """
    sizes = [largest(part) for part in objective]
    for numbers in rows:
        if numbers.nnz:
            worth = np.abs(numbers.data) * np.abs(np.asarray(price))[_row_of(numbers)]
            sizes.append(int(worth.max()) + 1)
    nodes = max(own.node_count for own in items)
    room = cost_limit(nodes) // (4 * max(1, *sizes))
    # Powers of ten, so that prices are plain decimals.
    fineness = 10 ** min(FINE_DECIMALS, max(0, len(str(room)) - 1))
    multiplier = []
    for row, worth_of_one in enumerate(price):
        number = round(worth_of_one * fineness)
        if upper[row] == NO_MOST:
            number = min(number, 0)
        if lower[row] == NO_LEAST:
            number = max(number, 0)
        multiplier.append(number)
    value = 0
    prices, reduced = [], []
    for own, cost, numbers in zip(items, objective, rows, strict=True):
        priced = _priced(cost, numbers, multiplier, fineness)
        flow, price_of_node = least_cost(own, priced)
        value += product_total(flow, priced)
        prices.append(price_of_node)
        reduced.append(reduced_cost(own.arcs.with_cost(priced), price_of_node))
    for row, number in enumerate(multiplier):
        value -= number * int(upper[row] if number > 0 else lower[row])
    return CertifiedBound(
        fineness=fineness,
        value=value,
        multiplier=tuple(multiplier),
        prices=tuple(prices),
        reduced=tuple(reduced),
    )


def least_cost_alone(own: ItemNetwork, cost: MoneyArray) -> IntArray:
    """Return a flow of least ``cost`` of one item by itself."""
    whole = contract(own.arcs, nodes=own.node_count, lanes=own.lanes.rows.shape[0])
    optimum = chosen_route(own, whole, cost).optimum()
    return whole.flow(optimum.flow, at=optimum.at)


def least_cost(own: ItemNetwork, cost: MoneyArray) -> tuple[IntArray, MoneyArray]:
    """Return a flow of least ``cost`` of one item by itself, and node prices that prove it."""
    whole = contract(own.arcs, nodes=own.node_count, lanes=own.lanes.rows.shape[0])
    route = chosen_route(own, whole, cost)
    optimum = route.optimum()
    flow = whole.flow(optimum.flow, at=optimum.at)
    prices: Any = whole.prices(route.prices(optimum, optimum.flow), cost)
    return flow, prices - prices[ROOT]


def _row_of(own: Coefficients) -> IntArray:
    """Return the row of each entry."""
    return np.repeat(np.arange(own.shape[0]), np.diff(own.indptr))


def _priced(
    cost: MoneyArray, numbers: Coefficients, multiplier: Sequence[int], fineness: int
) -> MoneyArray:
    """Return ``cost`` * fineness, and what each arc takes of the limits at their prices."""
    used = [row for row, number in enumerate(multiplier) if number]
    size = largest(cost) * fineness
    picked = numbers[used]
    most = max((abs(multiplier[row]) for row in used), default=0)
    size += most * int(np.abs(picked.data).sum()) if picked.nnz else 0
    priced = widened(cost, bound=size) * fineness
    if picked.nnz == 0:
        return priced
    worth = np.array([multiplier[row] for row in used], object if size >= SAFE else np.int64)
    np.add.at(priced, picked.indices, picked.data.astype(worth.dtype) * worth[_row_of(picked)])
    return priced
