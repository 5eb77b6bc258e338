"""What goods are worth where they are scarce: estimated prices that tell which lanes matter.

The dual of a transport problem, smoothed: each place takes its goods over all its lanes, in shares
that fall off with cost by a temperature, and prices rise where more is taken than there is. Newton
steps find the prices of one temperature, which is then lowered (Nesterov, *Smooth minimization of
non-smooth functions*, 2005, for the smoothing; Nocedal and Wright, *Numerical Optimization*, 2006,
section 3.4 and chapter 16, for damped steps within bounds). Floats: they decide where a solve
starts, never what it ends with.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from service.network.columns import BoolArray, IntArray

FloatArray = NDArray[np.floating[Any]]

# Places that lack or leave much do not trust the curvature where they stand: it is raised by that
# over so many temperatures (measured: 4 oscillates where stock is as scarce as can be, 1 is slow).
TRUSTED, TRUSTED_MAX = 2.0, 64.0
# No price moves by more temperatures than this at once.
STEP_MAX = 8.0
# Added to the curvature, relative to the quantities, so that a place nobody is near to can move.
DAMPING = 1e-3
# A step that makes things worse is cut to a quarter, at most so many times.
CUTS_MAX = 3
SHARE_SWEEPS = 8
# How many of the nearest lanes of a place compete in the curvature, and from which share on that
# is not on the nearest one: the rest bends the prices too little to be worth its time.
COMPETING = 10
CONTESTED = 1e-3
# A solve with the whole curvature is cubic in the number of places; beyond this each price moves by
# its own curvature alone.
PLACES_MAX = 2_048
TINY = np.float32(1e-30)
# A cost that nobody pays, in 32 bits.
FAR = 1e30


@dataclass(frozen=True, slots=True, kw_only=True)
class Offers:
    """Stock as the prices see it: at place p, ``steps[p, t]`` at a cost of ``cost[p, t]``.

    Both of shape (places, tiers), costs ascending in a row, infinite where there is no such tier.
    """

    cost: FloatArray
    steps: FloatArray

    def between(self, price: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return the least and the most that is offered at each place at exactly this price."""
        asked = price[:, None]
        least = np.where(self.cost < asked, self.steps, 0).sum(axis=1)
        most = np.where(self.cost <= asked, self.steps, 0).sum(axis=1)
        return least, most

    def within(self, price: FloatArray, moved: FloatArray) -> FloatArray:
        """Return ``moved``, stopped at the first cost of a tier on the way from ``price``."""
        asked = price[:, None]
        above = np.where(self.cost > asked, self.cost, np.inf).min(axis=1)
        below = np.where(self.cost < asked, self.cost, -np.inf).max(axis=1)
        below = np.maximum(below, self.cost[:, 0])
        result: FloatArray = np.clip(moved, below, above)
        return result

    def worth(self, price: FloatArray) -> float:
        """Return what all that is offered earns at these prices, above its cost."""
        gain = np.where(np.isfinite(self.cost), price[:, None] - self.cost, 0)
        return float((self.steps * np.maximum(gain, 0)).sum())


@dataclass(frozen=True, slots=True, kw_only=True)
class Choices:
    """The lanes that places choose from, of shape (choices, places); cost ``FAR`` if absent.

    ``source`` is the place of stock that a choice draws on (a position in ``Offers``), ``cost``
    what lies between there and here, in 64 bits where shortages are among the choices. ``room`` is
    what a lane can take of what is ``wanted``, as a fraction, None where no lane has a limit.
    """

    source: IntArray
    cost: FloatArray
    wanted: FloatArray
    room: FloatArray | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Taken:
    """Which ``share`` of what it wants each place takes by each choice, at some prices.

    ``moving`` is the part of it on lanes that are not full; ``value`` what the prices are worth:
    the dual of the smoothed problem, which the right ones make as large as can be.
    """

    share: FloatArray
    moving: FloatArray
    value: float


class Balance:
    """What is taken at prices of a temperature, and how that changes with the prices."""

    def __init__(
        self,
        choices: Choices,
        offers: Offers,
        price: FloatArray,
        *,
        short: FloatArray | None = None,
    ) -> None:
        """Start from ``price``; ``short`` is what it costs each place to go without a step."""
        self._given = price.shape[0]
        if short is not None:
            choices, offers, price = _with_shortage(choices, offers, price, short)
        self._choices, self._offers = choices, offers
        self._places = offers.cost.shape[0]
        competing = min(COMPETING, choices.source.shape[0])
        self._first, self._second = np.tril_indices(competing, -1)
        self._whole = self._places <= PLACES_MAX
        self._wanted = max(1.0, float(choices.wanted.sum()))
        self._temperature, self._taken = 0.0, None
        self._price: FloatArray = price
        self._trusted = TRUSTED

    _taken: Taken | None

    @property
    def price(self) -> FloatArray:
        """The price of each place of stock."""
        return self._price[: self._given]

    def step(self, temperature: float) -> float:
        """Improve the prices; return how much of all that is wanted the former ones had wrong."""
        if self._places == 0 or self._choices.wanted.shape[0] == 0:
            return 0.0
        if self._taken is None or temperature != self._temperature:
            self._temperature, self._taken = temperature, self._take(self._price, temperature)
        taken = self._taken
        excess, scale = self._excess(taken)
        imbalance = float(np.abs(excess).sum()) / self._wanted
        free = np.flatnonzero(excess)
        if free.shape[0] == 0:
            return imbalance
        move: FloatArray = np.zeros(self._places)
        move[free] = self._newton(taken, excess, scale=scale, free=free)
        self._trusted = min(2 * self._trusted, TRUSTED_MAX)
        price = self._price
        for _ in range(CUTS_MAX + 1):
            price = self._price + temperature * np.clip(move, -STEP_MAX, STEP_MAX)
            price = self._offers.within(self._price, price)
            self._taken = self._take(price, temperature)
            if self._taken.value >= taken.value:
                break
            move /= 4
            self._trusted = max(self._trusted / 4, TRUSTED)
        self._price = price
        return imbalance

    def _excess(self, taken: Taken) -> tuple[FloatArray, FloatArray]:
        """Return what each place lacks (or, below 0, has left), and how much passes it."""
        amount = taken.share * self._choices.wanted
        load = np.bincount(
            self._choices.source.ravel(), weights=amount.ravel(), minlength=self._places
        )
        least, most = self._offers.between(self._price)
        excess = np.where(load > most, load - most, np.where(load < least, load - least, 0))
        # At its lowest price a place simply keeps what nobody takes.
        excess[(self._price <= self._offers.cost[:, 0]) & (excess < 0)] = 0
        return excess, load + most + self._wanted / self._places * DAMPING

    def _take(self, price: FloatArray, temperature: float) -> Taken:
        """Return what is taken at ``price``."""
        choices = self._choices
        heat = np.float32(temperature)
        # Costs of very different size stand in 64 bits; how near ones differ fits into 32.
        landed: FloatArray = choices.cost + price.astype(choices.cost.dtype)[choices.source]
        nearest: FloatArray = landed.min(axis=0)
        weight = np.exp((nearest - landed).astype(np.float32) / heat)
        factor = 1 / weight.sum(axis=0)
        value = nearest + heat * np.log(factor)
        if choices.room is None:
            weight *= factor
            share, moving = weight, weight
        else:
            share, moving, factor = self._filled(weight, factor, choices.room)
            # What is taken over full lanes costs what it costs, and no more spreads over them.
            spread = np.log(np.maximum(share, TINY)) * heat
            value = np.where(share > 0, share * (landed + spread), 0).sum(axis=0)
        total = float((value * choices.wanted).sum(dtype=np.float64))
        return Taken(share=share, moving=moving, value=total - self._offers.worth(price))

    @staticmethod
    def _filled(
        weight: FloatArray, factor: FloatArray, room: FloatArray
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return shares where lanes have room for a part only, the part that moves, and factors."""
        # Full lanes take their room, the others the rest: each sweep fills up more lanes.
        full: BoolArray = np.zeros(weight.shape, np.bool_)
        for _ in range(SHARE_SWEEPS):
            over = weight * factor > room
            if not (over & ~full).any():
                break
            full |= over
            rest = 1 - np.where(full, room, 0).sum(axis=0)
            open_ = np.where(full, 0, weight).sum(axis=0)
            factor = np.maximum(rest, 0) / np.maximum(open_, TINY)
        moving = np.where(full, 0, weight * factor)
        return np.where(full, room, moving), moving, factor

    def _newton(
        self, taken: Taken, excess: FloatArray, *, scale: FloatArray, free: IntArray
    ) -> FloatArray:
        """Return the move of the ``free`` prices that would balance them, in temperatures."""
        source, places = self._choices.source, self._places
        moving = taken.moving * self._choices.wanted
        split = taken.moving / np.maximum(taken.moving.sum(axis=0), TINY)
        damping = DAMPING * scale + np.abs(excess) / self._trusted
        if not self._whole:
            own = np.bincount(
                source.ravel(), weights=(moving * (1 - split)).ravel(), minlength=places
            )
            move: FloatArray = excess[free] / (own + damping)[free]
            return move
        contested = np.flatnonzero(split.max(axis=0) < 1 - CONTESTED)
        of_place, part = source[:COMPETING, contested], split[:COMPETING, contested]
        amount = moving[:COMPETING, contested]
        between = (
            np.bincount(
                (of_place[self._first] * places + of_place[self._second]).ravel(),
                weights=(amount[self._first] * part[self._second]).ravel(),
                minlength=places * places,
            )
            .astype(np.float64, copy=False)
            .reshape(places, places)
        )
        between += between.T
        np.fill_diagonal(between, 0)
        # What leaves one place arrives at another: a common rise of all prices moves nothing.
        own = between.sum(axis=1) + damping
        curvature = -between[np.ix_(free, free)]
        np.fill_diagonal(curvature, own[free])
        solved: FloatArray = np.linalg.solve(curvature, excess[free])
        return solved


def _with_shortage(
    choices: Choices, offers: Offers, price: FloatArray, short: FloatArray
) -> tuple[Choices, Offers, FloatArray]:
    """Return the same with one more place of stock, of which all can have what they go without.

    It is the first choice of each place, so that it counts as competing, and costs no more however
    much is taken.
    """
    nowhere = np.full((1, short.shape[0]), price.shape[0])
    room = choices.room
    if room is not None:
        room = np.concatenate((np.full((1, short.shape[0]), np.inf, room.dtype), room))
    one = np.full((1, offers.cost.shape[1]), np.inf)
    one[0, 0] = 0
    plenty = np.zeros((1, offers.cost.shape[1]))
    plenty[0, 0] = FAR
    return (
        Choices(
            source=np.concatenate((nowhere, choices.source)),
            cost=np.concatenate((short[None], choices.cost)),
            wanted=choices.wanted,
            room=room,
        ),
        Offers(
            cost=np.concatenate((offers.cost, one)), steps=np.concatenate((offers.steps, plenty))
        ),
        np.append(price, 0.0),
    )
