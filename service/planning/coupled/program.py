"""The networks of items that share limits, side by side as the columns of one program."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import numpy as np
from scipy.sparse import coo_array, csr_array, hstack, vstack

from service.network.columns import BoolArray, IntArray, Network
from service.network.units import per_unit
from service.planning.coupled.linear_program import FloatArray
from service.planning.flow.contraction import Contraction, contract
from service.planning.model.arcs import ROOT, SAFE, UNLIMITED, Arcs, MoneyArray
from service.planning.model.item_network import ItemNetwork
from service.planning.model.scaling import common_grid
from service.planning.model.shared_limits import SharedLimits


@dataclass(frozen=True, slots=True, kw_only=True)
class ShortageGrid:
    """How shortages of several items add up: in a measure, in whole numbers of ``grain`` of it.

    ``number`` is how many of them one step of each item is.
    """

    measure: str
    grain: Fraction
    number: tuple[int, ...]


def shortage_grid(network: Network, items: Sequence[ItemNetwork]) -> ShortageGrid:
    """Return how the shortages of ``items`` add up."""
    measure = str(network.head.get("shortage_measure", "unit")) if len(items) > 1 else "unit"
    amounts = []
    for own in items:
        thing = network.items[own.item]
        amount = per_unit(thing, measure)
        if not amount:
            raise ValueError(f"item {thing.id} says nothing of {measure}")
        amounts.append(amount * thing.step)
    grain = common_grid(amounts)
    return ShortageGrid(
        measure=measure,
        grain=grain,
        number=tuple((amount / grain).numerator for amount in amounts),
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class CoupledProgram:
    """Columns are the arcs of all items that are left after contraction, item by item.

    ``first`` is where the columns of each item begin, its last entry their number. ``minimum`` and
    ``capacity`` have shape (columns,). ``balance`` has a row for each place of each item but its
    root, ``numbers`` one for each shared limit and then one for each priority: its shortage.
    """

    items: tuple[ItemNetwork, ...]
    limits: SharedLimits
    grid: ShortageGrid
    priorities: tuple[int, ...]
    contractions: tuple[Contraction, ...]
    first: IntArray
    minimum: IntArray
    capacity: IntArray
    tail: IntArray
    head: IntArray
    nodes: int
    balance: csr_array
    numbers: csr_array
    shortages: tuple[csr_array, ...]
    rank: IntArray

    def columns(self, values: Sequence[MoneyArray]) -> Any:  # noqa: ANN401 - int64 or Python ints
        """Return what arcs of each item cost, by column.

        Sums over circulations stay the same: what merged arcs cost is on the others.
        """
        return np.concatenate(
            [whole.arcs(value).cost for whole, value in zip(self.contractions, values, strict=True)]
        )

    def flows(self, values: IntArray) -> list[IntArray]:
        """Return the flow on all arcs of each item, from that on the columns."""
        return [
            whole.flow(values[self.first[at] : self.first[at + 1]])
            for at, whole in enumerate(self.contractions)
        ]

    def shares(self, values: FloatArray) -> list[FloatArray]:
        """Return the relaxed flow of each item on the arcs that count towards limits."""
        found = []
        for at, (own, whole) in enumerate(zip(self.items, self.contractions, strict=True)):
            flow = np.zeros(len(own.arcs))
            flow[whole.kept] = values[self.first[at] : self.first[at + 1]]
            found.append(flow)
        return found

    def on_columns(self, flows: Sequence[IntArray]) -> IntArray:
        """Return the flow on the columns."""
        return np.concatenate(
            [flow[whole.kept] for whole, flow in zip(self.contractions, flows, strict=True)]
        )

    def numbers_by_item(self) -> list[csr_array]:
        """Return the rows of limits and priorities over all arcs of each item."""
        return [
            vstack((own, short), format="csr")
            for own, short in zip(self.limits.of_item, self.shortages, strict=True)
        ]

    def short(self, flows: Sequence[IntArray]) -> list[int]:
        """Return the shortage of each priority in grains."""
        sums = [0] * len(self.priorities)
        for own, flow, number in zip(self.items, flows, self.grid.number, strict=True):
            arcs, ranks = own.ranked_shortages()
            for rank, steps in zip(ranks.tolist(), flow[arcs].tolist(), strict=True):
                sums[self.priorities.index(own.priorities[rank])] += steps * number
        return sums


def coupled_program(
    items: Sequence[ItemNetwork], limits: SharedLimits, grid: ShortageGrid
) -> CoupledProgram:
    """Lay out the networks of ``items``, whose rows in ``limits`` are in the same order."""
    priorities = tuple(
        sorted(
            {
                own.priorities[rank]
                for own in items
                for rank in set(own.ranked_shortages()[1].tolist())
            }
        )
    )
    shortages = [_shortage_rows(own, priorities, grid.number[at]) for at, own in enumerate(items)]
    contractions = [
        _contracted(own, np.unique(np.concatenate((limits.of_item[at].indices, rows.indices))))
        for at, (own, rows) in enumerate(zip(items, shortages, strict=True))
    ]
    arcs = [
        whole.arcs(np.zeros(len(own.arcs), np.int64)) for own, whole in _pairs(items, contractions)
    ]
    first = np.cumsum([0] + [len(part) for part in arcs])
    nodes = np.cumsum([0] + [whole.nodes - 1 for whole in contractions])
    tail, head = (
        np.concatenate(
            [
                np.where(ends == ROOT, -1, ends - 1 + start)
                for ends, start in zip(side, nodes, strict=False)
            ]
        )
        for side in ([part.tail for part in arcs], [part.head for part in arcs])
    )
    rank = np.full(int(first[-1]), -1, np.int64)
    numbers = vstack(
        (
            hstack([limits.of_item[at][:, whole.kept] for at, whole in enumerate(contractions)]),
            hstack(
                [rows[:, whole.kept] for rows, whole in zip(shortages, contractions, strict=True)]
            ),
        ),
        format="csr",
    )
    short = numbers[len(limits) :].tocoo()
    rank[short.coords[1]] = short.coords[0]
    return CoupledProgram(
        items=tuple(items),
        limits=limits,
        grid=grid,
        priorities=priorities,
        contractions=tuple(contractions),
        first=first,
        minimum=np.concatenate([part.minimum for part in arcs]),
        capacity=np.concatenate([part.capacity for part in arcs]),
        tail=tail,
        head=head,
        nodes=int(nodes[-1]),
        balance=_balance(tail, head, nodes=int(nodes[-1])),
        numbers=numbers,
        shortages=tuple(shortages),
        rank=rank,
    )


def _pairs(
    items: Sequence[ItemNetwork], contractions: Sequence[Contraction]
) -> list[tuple[ItemNetwork, Contraction]]:
    """Return each item with its contraction."""
    return list(zip(items, contractions, strict=True))


def _shortage_rows(own: ItemNetwork, priorities: tuple[int, ...], number: int) -> csr_array:
    """Return a row for each priority that adds up what is short of it."""
    arcs, ranks = own.ranked_shortages()
    rows = np.array([priorities.index(own.priorities[rank]) for rank in ranks.tolist()], np.int64)
    return csr_array(
        (np.full(arcs.shape[0], number, np.int64), (rows, arcs)),
        shape=(len(priorities), len(own.arcs)),
    )


def _contracted(own: ItemNetwork, counted: IntArray) -> Contraction:
    """Return the contraction of an item in which arcs that count towards a row stay."""
    # An arc with a limit is never merged over.
    capacity = own.arcs.capacity.copy()
    counted = counted[capacity[counted] == UNLIMITED]
    capacity[counted] = SAFE
    guarded = Arcs(
        tail=own.arcs.tail,
        head=own.arcs.head,
        minimum=own.arcs.minimum,
        capacity=capacity,
        cost=own.arcs.cost,
    )
    found = contract(guarded, nodes=own.node_count, lanes=own.lanes.rows.shape[0])
    return replace(found, original=own.arcs)


def _balance(tail: IntArray, head: IntArray, *, nodes: int) -> csr_array:
    """Return what each column brings to (1) and takes from (-1) each place; -1 is a root."""
    columns = np.arange(tail.shape[0])
    into, out = np.flatnonzero(head >= 0), np.flatnonzero(tail >= 0)
    return csr_array(
        coo_array(
            (
                np.concatenate((np.ones(into.shape[0], np.int64), np.full(out.shape[0], -1))),
                (
                    np.concatenate((head[into], tail[out])),
                    np.concatenate((columns[into], columns[out])),
                ),
            ),
            shape=(nodes, tail.shape[0]),
        )
    )


def shut(own: ItemNetwork, priorities: BoolArray, known: tuple[int, ...]) -> ItemNetwork:
    """Return an item that cannot be short of the marked ones of the ``known`` priorities."""
    arcs, ranks = own.ranked_shortages()
    marked = np.array(
        [priorities[known.index(own.priorities[rank])] for rank in ranks.tolist()], bool
    )
    capacity = own.arcs.capacity.copy()
    capacity[arcs[marked]] = 0
    return replace(own, arcs=replace(own.arcs, capacity=capacity))
