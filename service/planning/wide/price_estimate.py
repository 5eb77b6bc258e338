"""The prices a solve starts from: scarcity found on a sample first, then over all places."""

import numpy as np

from service.network.columns import IntArray
from service.planning.model.arcs import UNLIMITED
from service.planning.wide.lane_blocks import LaneBlocks
from service.planning.wide.nearest_lanes import Nearest, nearest_lanes
from service.planning.wide.places import Places, Upstream, Wishes
from service.planning.wide.scarcity_prices import FAR, Balance, Choices, FloatArray, Offers

# Measured at 200 x 5,000 and 500 x 20,000 on seeds of their own (2026-12-01): more of any of these
# costs more time than it saves later.
SAMPLE_MIN = 1_000
SAMPLE_PER_STOCK = 5
COARSE_CHOICES, COARSE_LISTS, COARSE_STEPS = 16, 4, 2
# Where hardly more is there than is wanted, prices spread far, and stock that became cheap must be
# among the choices: with so many, one round suffices where with 16 it took 5 to 10.
TIGHT = 1.05
TIGHT_CHOICES, TIGHT_LISTS, TIGHT_STEPS = 200, 1, 12
FINE_CHOICES, FINE_STEPS_MAX, HALF_UNTIL = 12, 14, 4
COLDEST = 1 / 8
COARSE_IMBALANCE, FINE_IMBALANCE = 0.1, 0.005
# Prices that are out by more than this fraction of all that is wanted are no better than none.
FOREIGN_IMBALANCE = 0.5
# A temperature, in terms of how much dearer the n-th nearest lane of a place is.
HOT_LANES, HOT_PART = 8, 0.5
COLD_LANES, COLD_PART = 2, 0.25


class Estimator:
    """Finds scarcity prices over the lanes of one item."""

    def __init__(self, blocks: LaneBlocks, places: Places, capacity: IntArray) -> None:
        """Look at the stock; ``capacity`` is that of every lane."""
        self._blocks, self._capacity = blocks, capacity
        self._limited = bool((capacity != UNLIMITED).any())
        self.wishes = places.wishes()
        self.stock, self.offers = places.offers()
        self._level = _scarce_level(self.wishes, self.offers)
        # How many times over all that is wanted is there.
        self.spare = float(self.offers.steps.sum()) / max(1.0, float(self.wishes.wanted.sum()))
        self.tight = self.spare < TIGHT
        self._upstream = Upstream(places, self.stock, blocks)

    def cold(self) -> FloatArray:
        """Return prices of the stock, from nothing, by a sample of the places that want goods."""
        ends = max(SAMPLE_MIN, SAMPLE_PER_STOCK * self.stock.shape[0])
        sample = self._blocks.sample(ends)
        price = self.offers.cost[:, 0].copy()
        if self._level is not None:
            # Goods are worth what the last of them saves, less the way there.
            way = self._nearest(sample, price, 1).cost
            price = np.maximum(price, self._level - float(np.median(way)))
        temperature, imbalance = 0.0, 1.0
        choices, lists, steps = (
            (TIGHT_CHOICES, TIGHT_LISTS, TIGHT_STEPS)
            if self.tight
            else (COARSE_CHOICES, COARSE_LISTS, COARSE_STEPS)
        )
        for _ in range(lists):
            nearest = self._nearest(sample, price, choices)
            temperature = temperature or self._heat(nearest, price)
            balance = self._balance(nearest, price)
            for _ in range(steps):
                imbalance = balance.step(temperature)
            price = balance.price
            if imbalance < COARSE_IMBALANCE:
                break
        return price

    def warm(self, start: FloatArray) -> FloatArray:
        """Return prices of the stock from those by place; unknown stock is as if it were plenty."""
        known = start[self.stock]
        price: FloatArray = np.where(np.isfinite(known), known, self.offers.cost[:, 0])
        return price

    def fine(self, price: FloatArray, *, warm: bool) -> tuple[FloatArray, Nearest] | None:
        """Return better prices, by all places, and the nearest lanes (by the given prices).

        None if ``warm`` prices are out by too much to be of any use.
        """
        nearest = self._nearest(self._blocks, price, FINE_CHOICES)
        cold = self._chill(nearest, price)
        temperature = max(2 * cold if warm else self._heat(nearest, price) / 2, cold)
        # While much is still to be moved, half of the places show where to.
        halved = not warm
        balance = self._balance(nearest.every(2) if halved else nearest, price)
        for step in range(FINE_STEPS_MAX):
            imbalance = balance.step(temperature)
            if warm and step == 0 and imbalance > FOREIGN_IMBALANCE:
                return None
            if temperature > cold and imbalance < COARSE_IMBALANCE:
                cold = self._chill(nearest, balance.price)
                temperature = max(temperature / 2, cold)
                if halved and temperature < HALF_UNTIL * cold:
                    nearest = self._nearest(self._blocks, balance.price, FINE_CHOICES)
                    balance, halved = self._balance(nearest, balance.price), False
            elif temperature <= cold and imbalance < FINE_IMBALANCE:
                break
        return balance.price, nearest

    def _heat(self, nearest: Nearest, price: FloatArray) -> float:
        """Return the temperature to begin with."""
        return max(COLDEST, HOT_PART * self._spread(nearest, price, HOT_LANES))

    def _chill(self, nearest: Nearest, price: FloatArray) -> float:
        """Return the temperature to end with."""
        return max(COLDEST, COLD_PART * self._spread(nearest, price, COLD_LANES))

    def places(self, price: FloatArray) -> IntArray:
        """Return the price of every place, rounded; 0 where nothing gets there."""
        landed, _ = self._upstream.prices(price)
        return np.rint(np.where(np.isfinite(landed), landed, 0)).astype(np.int64)

    def _spread(self, nearest: Nearest, price: FloatArray, lanes: float) -> float:
        """Return how much dearer than the nearest a lane is that ``lanes`` a place are nearer than.

        Judged by every fourth place.
        """
        nearest = nearest.every(4)
        landed = nearest.cost + self.places(price)[nearest.tails]
        found = ~nearest.absent.all(axis=0)
        dearer = np.where(nearest.absent, np.inf, landed)[:, found]
        return spread(dearer - dearer.min(axis=0), lanes)

    def _nearest(self, blocks: LaneBlocks, price: FloatArray, most: int) -> Nearest:
        return nearest_lanes(blocks, self.places(price), most)

    def _balance(self, nearest: Nearest, price: FloatArray) -> Balance:
        """Return the balance over the nearest lanes of places that want something."""
        landed, source = self._upstream.prices(price)
        absent = nearest.absent | ~np.isfinite(landed[nearest.tails])
        column = np.full(landed.shape[0], -1)
        column[nearest.ends[~absent.all(axis=0)]] = np.flatnonzero(~absent.all(axis=0))
        wishes = np.flatnonzero(column[self.wishes.place] >= 0)
        wanting = column[self.wishes.place[wishes]]
        wanted = self.wishes.wanted[wishes].astype(np.float32)
        lanes, tails = nearest.lanes[:, wanting], nearest.tails[:, wanting]
        absent = absent[:, wanting]
        source = source[tails]
        between = nearest.cost[:, wanting] + (landed[tails] - price[source] if len(price) else 0)
        room = None
        if self._limited:
            capacity = self._capacity[lanes]
            room = np.where(capacity == UNLIMITED, np.inf, capacity / wanted).astype(np.float32)
        # A sample stands for all.
        wanted *= np.float32(self.wishes.wanted.sum() / max(1.0, float(wanted.sum())))
        cost = np.where(absent, FAR, between)
        if self._level is None:
            choices = Choices(source=source, cost=cost.astype(np.float32), wanted=wanted, room=room)
            return Balance(choices, self.offers, price)
        return Balance(
            Choices(source=source, cost=cost.astype(np.float64), wanted=wanted, room=room),
            self.offers,
            price,
            short=np.minimum(self.wishes.short[wishes], FAR),
        )


def _scarce_level(wishes: Wishes, offers: Offers) -> float | None:
    """Return what a step short costs at the margin, if stock cannot serve all; else None."""
    order = np.argsort(-wishes.short, kind="stable")
    served = np.cumsum(wishes.wanted[order]) <= float(offers.steps.sum())
    if served.all():
        return None
    level = float(wishes.short[order[int(served.argmin())]])
    return level if np.isfinite(level) else None


def spread(dearer: FloatArray, lanes: float) -> float:
    """Return what ``lanes`` a place are less dear than; ``dearer`` has shape (choices, places)."""
    values = dearer.ravel()
    at = min(int(lanes * dearer.shape[1]), values.shape[0] - 1)
    if at < 0:
        return 0.0
    found = float(np.partition(values, at)[at])
    return found if np.isfinite(found) else float(values[np.isfinite(values)].max(initial=0))
