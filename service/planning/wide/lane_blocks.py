"""All lanes of an item by where they end, in blocks that fit a processor's cache."""

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from service.network.columns import BoolArray, IntArray
from service.planning.flow.contraction import Contraction
from service.planning.model.arcs import Arcs, MoneyArray, largest

# 64k costs of 4 bytes and two temporaries of that size stay within 1 MiB of cache (measured:
# twice as fast as whole columns at 10 million lanes, 2026-12-01).
BLOCK_CELLS = 2**16

# Where all costs and prices are below this, sums of three stay within 32 bits.
NARROW = 2**28


@dataclass(frozen=True, slots=True, kw_only=True)
class Block:
    """Some places where lanes end; row r holds the lanes that end in ``ends[r]``.

    ``cost`` has shape (rows, slots), int32 or int64. ``tails`` are the places that lanes leave, of
    shape (slots,) if all rows have the same ones, else (rows, slots). The lane in a cell is
    ``lane_of_row[row] + lane_of_slot[slot]`` for equal rows, else ``lanes[row, slot]``. ``absent``
    marks cells without an open lane, None if there are none.
    """

    ends: IntArray
    tails: IntArray
    cost: NDArray[Any]
    absent: BoolArray | None
    lanes: NDArray[np.int32] | None
    lane_of_row: IntArray
    lane_of_slot: IntArray

    def lane_at(self, row: IntArray, slot: IntArray) -> IntArray:
        """Return the lanes in some cells."""
        if self.lanes is not None:
            return self.lanes[row, slot].astype(np.int64)
        lane: IntArray = self.lane_of_row[row] + self.lane_of_slot[slot]
        return lane

    def tail_at(self, row: IntArray, slot: IntArray) -> IntArray:
        """Return the places that the lanes in some cells leave."""
        return self.tails[slot] if self.tails.ndim == 1 else self.tails[row, slot]

    def landed(self, price: MoneyArray) -> NDArray[Any]:
        """Return cost + price at the tail in every cell; absent cells hold a number too."""
        at_tail = price[self.tails]
        if self.cost.dtype == np.int32 and largest(price) < NARROW:
            return self.cost + at_tail.astype(np.int32)
        return self.cost + at_tail

    def reduced(self, price: MoneyArray) -> NDArray[Any]:
        """Return the reduced cost in every cell; absent cells hold a number too."""
        landed = self.landed(price)
        landed -= price[self.ends].astype(landed.dtype)[:, None]
        return landed

    def every(self, stride: int) -> "Block":
        """Return every ``stride``-th row."""
        rows = slice(None, None, stride)
        return Block(
            ends=self.ends[rows],
            tails=self.tails if self.tails.ndim == 1 else self.tails[rows],
            cost=self.cost[rows],
            absent=None if self.absent is None else self.absent[rows],
            lanes=None if self.lanes is None else self.lanes[rows],
            lane_of_row=self.lane_of_row[rows],
            lane_of_slot=self.lane_of_slot,
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class LaneBlocks:
    """Every open lane of an item in exactly one cell; prices are those of contracted places."""

    blocks: tuple[Block, ...]
    lane_count: int

    def sample(self, ends: int) -> "LaneBlocks":
        """Return the lanes into about ``ends`` of the places, evenly spread."""
        stride = max(1, sum(len(block.ends) for block in self.blocks) // max(1, ends))
        return LaneBlocks(
            blocks=tuple(block.every(stride) for block in self.blocks), lane_count=self.lane_count
        )

    def tails(self, places: int) -> BoolArray:
        """Return which of the ``places`` some lane leaves."""
        leaves = np.zeros(places, np.bool_)
        for block in self.blocks:
            leaves[block.tails] = True
        return leaves

    def heads(self, places: int) -> BoolArray:
        """Return in which of the ``places`` some lane ends."""
        enters = np.zeros(places, np.bool_)
        for block in self.blocks:
            enters[block.ends] = True
        return enters

    def not_above(self, price: MoneyArray, limit: int) -> tuple[IntArray, IntArray]:
        """Return all lanes whose reduced cost is at most ``limit``, and these costs."""
        lanes, costs = [], []
        for block in self.blocks:
            reduced = block.reduced(price)
            low = reduced <= limit
            if block.absent is not None:
                low &= ~block.absent
            cells = np.flatnonzero(low)
            row, slot = np.divmod(cells, reduced.shape[1])
            lanes.append(block.lane_at(row, slot))
            costs.append(reduced.reshape(-1)[cells].astype(np.int64))
        if not lanes:
            return np.zeros(0, np.int64), np.zeros(0, np.int64)
        return np.concatenate(lanes), np.concatenate(costs)


def lane_blocks(arcs: Arcs, contraction: Contraction, offset: MoneyArray, count: int) -> LaneBlocks:
    """Return the first ``count`` arcs, which are lanes, by the place in which they end.

    Lanes without room (closed ones) and those within one place are left out. ``offset`` are those
    of the contraction, int64; they are added to the costs, so that prices of places suffice.
    """
    place = contraction.place
    tail, head, cost = arcs.tail[:count], arcs.head[:count], arcs.cost[:count]
    closed = arcs.capacity[:count] == 0
    absent = closed if closed.any() else None
    table = _full_table(tail, head)
    if table is not None and not np.isin(place[head[:table]], place[tail[::table]]).any():
        return LaneBlocks(
            blocks=tuple(
                _table_blocks(tail, head, cost, absent, ends=table, place=place, offset=offset)
            ),
            lane_count=count,
        )
    loose = place[tail] != place[head]
    if absent is not None:
        loose &= ~absent
    lanes = np.flatnonzero(loose)
    return LaneBlocks(
        blocks=tuple(_ragged_blocks(tail, head, cost, lanes, place=place, offset=offset)),
        lane_count=count,
    )


def _full_table(tail: IntArray, head: IntArray) -> int | None:
    """Return the number of places at which lanes end if every tail has one lane to each of them.

    Lanes are sorted by origin and destination, so that such a table lies in the columns as it is.
    """
    if tail.shape[0] == 0:
        return None
    ends = int(np.argmax(tail != tail[0])) or tail.shape[0]
    if tail.shape[0] % ends:
        return None
    by_tail, by_head = tail.reshape(-1, ends), head.reshape(-1, ends)
    starts = by_tail[:, 0]
    if np.unique(starts).shape[0] != starts.shape[0] or np.unique(head[:ends]).shape[0] != ends:
        return None
    whole = bool((by_tail == starts[:, None]).all()) and bool((by_head == by_head[0]).all())
    return ends if whole else None


def _table_blocks(  # noqa: PLR0913 - the columns of a table
    tail: IntArray,
    head: IntArray,
    cost: MoneyArray,
    absent: BoolArray | None,
    *,
    ends: int,
    place: IntArray,
    offset: MoneyArray,
) -> Iterator[Block]:
    """Yield the blocks of a full table."""
    tails, heads = tail[::ends], head[:ends]
    table = cost.reshape(-1, ends)
    at_tail, at_head = offset[tails], offset[heads]
    narrow = largest(cost) + largest(at_tail) + largest(at_head) < NARROW
    rows = max(1, BLOCK_CELLS // tails.shape[0])
    for start in range(0, ends, rows):
        part = slice(start, start + rows)
        # A copy even where the table is one row or one column: offsets are added in place.
        block: NDArray[Any] = np.array(
            table[:, part].T, dtype=np.int32 if narrow else np.int64, order="C"
        )
        if at_tail.any():
            block += at_tail.astype(block.dtype)
        if at_head.any():
            block -= at_head[part].astype(block.dtype)[:, None]
        yield Block(
            ends=place[heads[part]],
            tails=place[tails],
            cost=block,
            absent=None
            if absent is None
            else np.ascontiguousarray(absent.reshape(-1, ends)[:, part].T),
            lanes=None,
            lane_of_row=np.arange(start, start + block.shape[0]),
            lane_of_slot=np.arange(tails.shape[0]) * ends,
        )


def _ragged_blocks(  # noqa: PLR0913 - the columns of a table
    tail: IntArray,
    head: IntArray,
    cost: MoneyArray,
    lanes: IntArray,
    *,
    place: IntArray,
    offset: MoneyArray,
) -> Iterator[Block]:
    """Yield blocks of rows of about the same length, shortest first, the rest of a row absent."""
    if lanes.shape[0] == 0:
        return
    cost = cost[lanes] + offset[tail[lanes]] - offset[head[lanes]]
    narrow = largest(cost) < NARROW
    tails, heads = place[tail[lanes]], place[head[lanes]]
    order = np.argsort(heads, kind="stable")
    lengths = np.bincount(heads)
    ends = np.flatnonzero(lengths)
    lengths = lengths[ends]
    first = np.cumsum(lengths) - lengths
    by_length = np.argsort(lengths, kind="stable")
    start = 0
    while start < by_length.shape[0]:
        stop = _block_stop(lengths[by_length], start)
        rows = by_length[start:stop]
        slots = int(lengths[rows[-1]])
        cells = first[rows][:, None] + np.arange(slots)
        absent = np.arange(slots) >= lengths[rows][:, None]
        # An absent cell repeats the last lane of its row.
        cells = np.where(absent, (first[rows] + lengths[rows] - 1)[:, None], cells)
        own = order[cells]
        yield Block(
            ends=ends[rows],
            tails=tails[own],
            cost=cost[own].astype(np.int32 if narrow else np.int64),
            absent=absent if absent.any() else None,
            lanes=lanes[own].astype(np.int32),
            lane_of_row=rows,
            lane_of_slot=np.arange(slots),
        )
        start = stop


def _block_stop(lengths: IntArray, start: int) -> int:
    """Return where a block that starts with row ``start`` ends: full, or rows get twice as long."""
    longest = int(lengths[start]) * 2
    stop = int(np.searchsorted(lengths, longest, side="right"))
    return min(stop, start + max(1, BLOCK_CELLS // longest))
