"""Lanes whose steps get dearer, as several lanes side by side: one for each run of equal steps.

What a further step costs by a tariff never falls (the intake has seen to it), so that a plan of
least cost fills the cheaper of them first, and what flows on all of them together costs what the
tariff says. Outside planning nobody sees them: names, paths and plan lines are those of the lane.
"""

from collections.abc import Mapping
from dataclasses import fields, replace
from fractions import Fraction
from typing import Any

import numpy as np

from service.network.columns import BoolArray, IntArray, Network
from service.network.days import cut_off_day, day_text
from service.network.freight import Run
from service.network.lane_freight import freight_runs
from service.planning.model.arcs import UNLIMITED
from service.planning.model.bounds import LaneBounds
from service.planning.model.limits import NumbersTooLargeError
from service.planning.model.scaling import Rationals


def with_segments(bounds: LaneBounds, network: Network, item: int) -> LaneBounds:
    """Return ``bounds`` with each lane that has a tariff split into its segments, cheapest first.

    Segments beyond the capacity of the lane are left out. Where no lane has a tariff ``bounds`` are
    returned as they are.
    """
    if not network.lanes.tariff.values:
        return bounds
    codes, runs = _kinds(bounds, network, item)
    if not runs:
        return bounds
    table = _Table(runs)
    counts = np.ones(codes.shape[0], np.int64)
    for code in runs:
        members = np.flatnonzero(codes == code)
        counts[members] = table.needed(code, bounds, members)
    index = np.repeat(np.arange(codes.shape[0]), counts)
    first = np.repeat(np.cumsum(counts) - counts, counts)
    at = table.place(codes[index], np.arange(index.shape[0]) - first)
    start, width = table.start[at], table.width[at]
    changed: dict[str, Any] = {
        name: column[index]
        for name in (field.name for field in fields(bounds))
        if isinstance(column := getattr(bounds, name), np.ndarray)
    }
    for name in ("minimum", "stated_minimum", "capacity", "stated_capacity"):
        changed[name] = _within(changed[name], start, width)
    charges = None if bounds.charges is None else bounds.charges.at(index)
    freight = Rationals(
        values=np.ones(index.shape[0], np.int64),
        codes=at.astype(np.int32),
        multipliers=table.money,
    )
    return replace(
        bounds,
        **changed
        | {
            "at": changed["rows"],
            "charges": charges,
            "money": bounds.money.at(index).plus(freight),
            "first": first,
            "width": width,
        },
    )


def _kinds(
    bounds: LaneBounds, network: Network, item: int
) -> tuple[IntArray, dict[int, tuple[Run, ...]]]:
    """Return for each lane a number for its tariff and day, -1 for none, and the runs of each."""
    codes = network.lanes.tariff.codes[bounds.at]
    kinds = np.full(codes.shape[0], -1, np.int64)
    own = np.flatnonzero(codes >= 0)
    days = np.full(own.shape[0], cut_off_day(network.head))
    if bounds.departs is not None:
        days = bounds.departs[own]
    pairs, inverse = np.unique(np.stack((codes[own], days)), axis=1, return_inverse=True)
    kinds[own] = inverse.ravel()
    of_day = {day: freight_runs(network, item, day_text(day)) for day in np.unique(days).tolist()}
    runs = {kind: of_day[day][code] for kind, (code, day) in enumerate(pairs.T.tolist())}
    return kinds, runs


def natural(width: IntArray, flow: IntArray, gain: IntArray, first: IntArray) -> BoolArray:
    """Return on which segments of fixed lanes a price says no more than that they follow in order.

    A full segment that earns is followed by the next one, an empty one that would cost follows the
    one before: neither shows that a step more or less of the lane would pay.
    """
    full: BoolArray = (width != UNLIMITED) & (flow == width) & (gain < 0)
    unused: BoolArray = (flow == 0) & (gain > 0) & (first != np.arange(first.shape[0]))
    return full | unused


class _Table:
    """The runs of all tariffs in one list, behind an entry for lanes that have none."""

    def __init__(self, runs: Mapping[int, tuple[Run, ...]]) -> None:
        """List the runs of each tariff and day."""
        self._offset = np.zeros(len(runs) + 1, np.int64)
        starts, widths, money = [0], [UNLIMITED], [Fraction(0)]
        for code, own in runs.items():
            self._offset[code] = len(starts)
            start = 0
            for run in own:
                starts.append(start)
                widths.append(UNLIMITED if run.width is None else run.width)
                money.append(run.money)
                start += run.width or 0
        if max(starts) >= 2**62:
            raise NumbersTooLargeError("A break of a tariff is 2^62 steps or more.")
        self.start, self.width = np.array(starts, np.int64), np.array(widths, np.int64)
        self.money = tuple(money)
        self._runs = {code: len(own) for code, own in runs.items()}

    def needed(self, code: int, bounds: LaneBounds, members: IntArray) -> IntArray:
        """Return how many runs each of the lanes ``members`` needs: at least one."""
        all_ = self._runs[code]
        offset = int(self._offset[code])
        capacity = bounds.capacity[members]
        within = np.searchsorted(self.start[offset : offset + all_], capacity, side="left")
        # What a rule fixes is looked at without it, too (planning/documents/reasons.py).
        whole = (capacity == UNLIMITED) | bounds.fixed[members]
        return np.where(whole, all_, np.maximum(within, 1))

    def place(self, codes: IntArray, ordinal: IntArray) -> IntArray:
        """Return where the run of each segment stands in the list."""
        return np.where(codes >= 0, self._offset[codes] + ordinal, 0)


def _within(steps: IntArray, start: IntArray, width: IntArray) -> IntArray:
    """Return the part of ``steps`` (UNLIMITED: without end) that lies in a segment."""
    above = np.maximum(steps - start, 0)
    part = np.where(width == UNLIMITED, above, np.minimum(above, width))
    return np.where(steps == UNLIMITED, width, part)
