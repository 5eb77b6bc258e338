"""The formal network of one item: nodes and arcs as columns, and what each of them stands for."""

from dataclasses import dataclass
from enum import IntEnum, StrEnum
from typing import Any

import numpy as np
from numpy.typing import NDArray

from service.network.columns import BoolArray, CodeArray, IntArray

# Scaled money is int64 wherever bounds allow it and a column of Python ints where they do not:
# the same array operations are exact on both.
MoneyArray = NDArray[Any]

UNLIMITED = -1
ROOT = 0

# Below this every sum of two numbers fits int64 with room to spare.
SAFE = 2**62


class Side(StrEnum):
    """The places of one site in the formal network; ``ROOT`` belongs to no site."""

    ROOT = "root"
    DEMAND = "demand"
    IN = "in"
    KEEP = "keep"
    OUT = "out"
    RECEIVED = "received"
    SENT = "sent"
    STOCK = "stock"


SIDES: tuple[Side, ...] = tuple(Side)


class Kind(IntEnum):
    """What an arc stands for; ``Arcs.subject`` says of which lane, tier, group or site."""

    LANE = 0
    SUPPLY = 1  # root -> in or stock; subject: tier
    DRAW = 2  # stock -> in; subject: tier
    KEPT = 3  # stock -> keep; subject: tier
    THROUGH = 4  # in -> out; subject: site
    ARRIVE = 5  # received -> in; subject: site
    LEAVE = 6  # out -> sent; subject: site
    PASS = 7  # received -> sent; subject: site
    SERVE = 8  # out -> demand; subject: group
    SERVE_ARRIVED = 9  # received -> demand; subject: group
    WANT = 10  # demand -> root; subject: group
    SHORT = 11  # root -> demand; subject: group
    KEEP_WANT = 12  # keep -> root; subject: kept row
    KEEP_SHORT = 13  # root -> keep; subject: kept row
    STORE = 14  # a place -> that of the next day, from where lanes leave; subject: place


@dataclass(frozen=True, slots=True, kw_only=True)
class Arcs:
    """Arcs as columns, all of shape (arcs,).

    ``tail`` and ``head`` are node positions; ``minimum`` and ``capacity`` are in steps (capacity
    ``UNLIMITED``: no limit); ``cost`` is scaled money per step. 0 <= minimum <= capacity.
    """

    tail: IntArray
    head: IntArray
    minimum: IntArray
    capacity: IntArray
    cost: MoneyArray

    def __len__(self) -> int:
        """Return the number of arcs."""
        return int(self.tail.shape[0])

    def with_cost(self, cost: MoneyArray) -> "Arcs":
        """Return the same arcs at another cost."""
        return Arcs(
            tail=self.tail,
            head=self.head,
            minimum=self.minimum,
            capacity=self.capacity,
            cost=cost,
        )

    def at(self, positions: IntArray | BoolArray) -> "Arcs":
        """Return the arcs at ``positions`` (or where true), in that order."""
        return Arcs(
            tail=self.tail[positions],
            head=self.head[positions],
            minimum=self.minimum[positions],
            capacity=self.capacity[positions],
            cost=self.cost[positions],
        )

    def fixed_at(self, flow: IntArray, fixed: BoolArray) -> "Arcs":
        """Return the same arcs, those in ``fixed`` held at their ``flow``."""
        return Arcs(
            tail=self.tail,
            head=self.head,
            minimum=np.where(fixed, flow, self.minimum),
            capacity=np.where(fixed, flow, self.capacity),
            cost=self.cost,
        )

    def can_take_more(self, flow: IntArray) -> BoolArray:
        """Return where one more step would fit."""
        room: BoolArray = (self.capacity == UNLIMITED) | (flow < self.capacity)
        return room

    def can_give_up(self, flow: IntArray) -> BoolArray:
        """Return where one step less would still meet the minimum."""
        return flow > self.minimum


@dataclass(frozen=True, slots=True, kw_only=True)
class Nodes:
    """Nodes as columns, all of shape (nodes,); position 0 is the root.

    ``side`` is a position in ``SIDES``, ``site`` one in ``Network.sites`` (-1: root);
    ``qualifier`` tells nodes of one side apart: the group (a position in the item's groups) for
    demand, the origin site for received (or -1), the 1-based tier number for stock, else -1.
    ``place`` is that of the item's places (``site_days.py``), -1 where a node has no day.
    """

    side: NDArray[np.int8]
    site: CodeArray
    qualifier: CodeArray
    place: IntArray

    def __len__(self) -> int:
        """Return the number of nodes, the root included."""
        return int(self.side.shape[0])


def total(values: MoneyArray | IntArray) -> int:
    """Return the exact sum; int64 could wrap where the bound below does not hold."""
    if values.shape[0] == 0:
        return 0
    if values.dtype == object or int(np.abs(values).max()) * values.shape[0] >= SAFE:
        return sum(int(value) for value in values.tolist())
    return int(values.sum())


def product_total(left: MoneyArray | IntArray, right: MoneyArray | IntArray) -> int:
    """Return the exact sum of ``left * right``, such as flow times cost."""
    used = np.flatnonzero(left)
    return sum(
        int(a) * int(b) for a, b in zip(left[used].tolist(), right[used].tolist(), strict=True)
    )


def largest(values: MoneyArray | IntArray) -> int:
    """Return the largest absolute value, 0 of nothing."""
    if values.shape[0] == 0:
        return 0
    return max(abs(int(values.max())), abs(int(values.min())))


def narrowed(values: MoneyArray) -> MoneyArray:
    """Return ``values`` as int64 where they fit, else unchanged."""
    if values.dtype == object and largest(values) < SAFE:
        return values.astype(np.int64)
    return values


def widened(values: MoneyArray, *, bound: int) -> MoneyArray:
    """Return ``values`` as Python ints where ``bound``, the largest result, needs them."""
    if bound >= SAFE and values.dtype != object:
        return values.astype(object)
    return values
