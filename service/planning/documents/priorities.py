"""What was achieved in each step of the order of aims: shortage by priority, then cost."""

from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from service.planning.model.arcs import product_total
from service.planning.solve import ItemFlow


@dataclass(frozen=True, slots=True, kw_only=True)
class Achieved:
    """Steps short by priority (ascending), weighted lateness and scaled money of one item.

    ``late`` is the sum of steps, days and weights; None where nothing could be late.
    """

    short: tuple[tuple[int, int], ...]
    money: int
    late: int | None = None


def achieved(solved: ItemFlow, *, shortages: bool) -> Achieved:
    """Return what the plan of one item achieves.

    The weights prove that each is as small as it can be once those before it are: the bound of
    every step equals what is achieved (DEVELOPERS.md, "What is computed").
    """
    own = solved.own
    short = dict.fromkeys(range(len(own.priorities)), 0)
    arcs, ranks = own.ranked_shortages()
    missing = np.flatnonzero(solved.flow[arcs])
    for rank, steps in zip(
        ranks[missing].tolist(), solved.flow[arcs[missing]].tolist(), strict=True
    ):
        short[rank] += steps
    return Achieved(
        short=tuple((priority, short[rank]) for rank, priority in enumerate(own.priorities))
        if shortages
        else (),
        money=product_total(solved.flow, own.arcs.cost),
        late=product_total(solved.flow, own.late_weight) if own.late_base else None,
    )


def money_of(scaled: int, scale: Fraction) -> Fraction:
    """Return scaled money as money."""
    return scaled / scale
