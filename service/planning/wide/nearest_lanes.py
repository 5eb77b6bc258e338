"""The lanes that would bring goods to each place at least cost, if prices were what they seem."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from service.network.columns import BoolArray, IntArray
from service.planning.model.arcs import MoneyArray
from service.planning.wide.lane_blocks import Block, LaneBlocks


@dataclass(frozen=True, slots=True, kw_only=True)
class Nearest:
    """For each of ``ends`` its nearest lanes, of shape (most, ends), the nearest first.

    Where ``absent`` there are no so many, and the cell holds some lane twice.
    """

    ends: IntArray
    tails: IntArray
    cost: IntArray
    lanes: IntArray
    absent: BoolArray

    def every(self, stride: int) -> "Nearest":
        """Return every ``stride``-th place."""
        return Nearest(
            ends=self.ends[::stride],
            tails=self.tails[:, ::stride],
            cost=self.cost[:, ::stride],
            lanes=self.lanes[:, ::stride],
            absent=self.absent[:, ::stride],
        )


def nearest_lanes(lanes: LaneBlocks, price: MoneyArray, most: int) -> Nearest:
    """Return the ``most`` lanes of least cost + price at the tail into every place.

    Equal ones are taken in an order of each place's own, so that not all of them crowd on the
    same few tails.
    """
    parts = [_of_block(block, price, most) for block in lanes.blocks]
    if not parts:
        return _none(most)
    return Nearest(
        ends=np.concatenate([part.ends for part in parts]),
        tails=np.concatenate([part.tails for part in parts], axis=1),
        cost=np.concatenate([part.cost for part in parts], axis=1),
        lanes=np.concatenate([part.lanes for part in parts], axis=1),
        absent=np.concatenate([part.absent for part in parts], axis=1),
    )


def _of_block(block: Block, price: MoneyArray, most: int) -> Nearest:
    """Return the nearest lanes of one block."""
    landed = block.landed(price)
    rows, slots = landed.shape
    if block.absent is not None:
        landed[block.absent] = np.iinfo(landed.dtype).max // 2
    landed -= landed.min(axis=1)[:, None]
    kept = min(most, slots)
    # One number holds what a lane costs more than the nearest one (the upper bits, cut where it is
    # too much to matter) and its slot (the lower bits): such numbers sort six times as fast as
    # positions do (measured with numpy 2.4.6, 2026-12-01).
    bits = (slots - 1).bit_length()
    most_cost = 2 ** (31 - bits) - 1
    shift, tied = _look(landed, kept, most_cost)
    if shift:
        landed >>= shift
    np.minimum(landed, most_cost, out=landed)
    key = landed.astype(np.int32, copy=False)
    key <<= bits
    mask = 2**bits - 1
    turn = (block.ends * 2_654_435_761 >> 7) & (mask if tied else 0)
    if tied:
        key |= (np.arange(slots, dtype=np.int32) + turn.astype(np.int32)[:, None]) & mask
    else:
        key |= np.arange(slots, dtype=np.int32)
    if kept < slots:
        key.partition(kept - 1, axis=1)
        key = key[:, :kept].copy()
    key.sort(axis=1)
    slot = ((key & mask) - turn[:, None]) & mask
    row = np.arange(rows)[:, None]
    absent = np.zeros((most, rows), np.bool_)
    if block.absent is not None:
        absent[:kept] = block.absent[row, slot].T
    absent[kept:] = True
    at = np.minimum(np.arange(most), kept - 1)
    slot = slot[:, at]
    return Nearest(
        ends=block.ends,
        tails=block.tail_at(row, slot).T,
        cost=block.cost[row, slot].T.astype(np.int64),
        lanes=block.lane_at(row, slot).T,
        absent=absent,
    )


def _look(landed: NDArray[Any], kept: int, most_cost: int) -> tuple[int, bool]:
    """Return how many low bits to drop so that near lanes can be told apart, and if many tie.

    Judged by some of the places.
    """
    some = landed[:: max(1, landed.shape[0] // 64)]
    widest = np.partition(some, kept - 1, axis=1)[:, kept - 1]
    shift = max(0, (2 * int(np.median(widest))).bit_length() - most_cost.bit_length())
    tied = int((some >> shift <= widest[:, None] >> shift).sum()) > 2 * kept * some.shape[0]
    return shift, tied


def _none(most: int) -> Nearest:
    """Return the nearest lanes of no place."""
    none = np.zeros((most, 0), np.int64)
    return Nearest(ends=none[0], tails=none, cost=none, lanes=none, absent=none.astype(np.bool_))
