"""Limits that items share, as rows of whole numbers over the arcs of each item's network.

A row adds up what lanes carry (and, for what passes a site, what is drawn there) in its measure.
Rows that no flow within the limits of the arcs could break are left out: what is left is what makes
a network one of ``linear_program``.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from scipy.sparse import csr_array

from service.network.columns import BoolArray, IntArray
from service.planning.model.arcs import SAFE, UNLIMITED, Kind
from service.planning.model.item_network import ItemNetwork
from service.planning.model.limits import NumbersTooLargeError

# What stands for no limit: no row adds up to as much.
NO_LEAST, NO_MOST = -SAFE, SAFE

# Rows of an item: whole numbers, shape (limits, arcs of the item).
Coefficients = csr_array


@dataclass(frozen=True, slots=True, kw_only=True)
class LimitName:
    """What a row is about: a rule (or None: a lane's own limits) and, of it, one site or lane.

    ``flow`` is what a rule about sites counts there: what is received, sent or passes through.
    """

    rule: str | None
    site: int | None = None
    lane: int | None = None
    flow: str | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class SharedLimits:
    """Rows as columns of shape (limits,): ``lower`` <= sum of ``of_item @ flow`` <= ``upper``.

    They are ``NO_LEAST`` and ``NO_MOST`` where there is no limit. One of a row's whole numbers
    stands for ``grain`` of its measure. ``of_item`` has an entry for each of the items given.
    """

    names: tuple[LimitName, ...]
    kinds: tuple[str, ...]
    measures: tuple[str, ...]
    grain: tuple[Fraction, ...]
    lower: IntArray
    upper: IntArray
    of_item: tuple[Coefficients, ...]

    def __len__(self) -> int:
        """Return the number of rows."""
        return len(self.names)

    def of(self, items: Sequence[int], rows: IntArray) -> "SharedLimits":
        """Return some rows, over some of the items."""
        picked = rows.tolist()
        return SharedLimits(
            names=tuple(self.names[row] for row in picked),
            kinds=tuple(self.kinds[row] for row in picked),
            measures=tuple(self.measures[row] for row in picked),
            grain=tuple(self.grain[row] for row in picked),
            lower=self.lower[rows],
            upper=self.upper[rows],
            of_item=tuple(self.of_item[item][rows] for item in items),
        )

    def touched(self) -> BoolArray:
        """Return, in shape (items, limits), which item is in which row."""
        return np.array([np.diff(own.indptr) > 0 for own in self.of_item], np.bool_).reshape(
            len(self.of_item), len(self)
        )

    def activity(self, flows: Sequence[IntArray]) -> IntArray:
        """Return what each row adds up to, exactly.

        Raises ``NumbersTooLargeError`` where that may reach 2**62.
        """
        sums = np.zeros(len(self), np.int64)
        for own, flow in zip(self.of_item, flows, strict=True):
            if own.nnz == 0:
                continue
            most = int(abs(own).sum(axis=1).max()) * max(1, int(np.abs(flow).max()))
            if most * len(self.of_item) >= SAFE:
                raise NumbersTooLargeError("What counts towards a shared limit reaches 2^62.")
            sums += own @ flow
        return sums

    def broken(self, activity: IntArray) -> BoolArray:
        """Return which rows are above their most or below their least."""
        broken: BoolArray = (activity > self.upper) | (activity < self.lower)
        return broken


_SITE_ARCS = {"received": Kind.ARRIVE, "sent": Kind.LEAVE, "through": Kind.THROUGH}


def arc_of_site(own: ItemNetwork, name: LimitName) -> int | None:
    """Return the one arc that carries all that a limit of a site counts, None where none does."""
    if name.site is None or name.flow is None:
        return None
    if own.layout.limit[name.flow][name.site] == UNLIMITED:
        return None
    arcs = own.of_kind(_SITE_ARCS[name.flow])
    found = arcs[own.subject[arcs] == name.site]
    return int(found[0]) if found.shape[0] == 1 else None
