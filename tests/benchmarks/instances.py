"""The instances: dense networks made after one recipe, from seeds that nothing was tuned on.

Warehouses lie anywhere in a square, six ship-tos of ten around forty towns; a lane costs the
distance, 15 % noise and what handling costs at the warehouse, in whole cents; order quantities are
lognormal. Everything is drawn from the seed, so that everybody measures the same networks.
"""

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from service.network.columns import IntArray

# Seeds below were used while prices and shortlists were tuned.
SEED_MIN = 101
UNLIMITED = -1
CENTS = 100

Costs = Literal["distance", "ties"]
Change = Literal["demand 10 %", "demand 50 %", "outage", "costs 5 %"]

_TOWNS = 40


@dataclass(frozen=True, slots=True, kw_only=True)
class Recipe:
    """What a network is made of.

    ``supply_ratio`` is all supply over all demand, in hundredths; ``capped`` the part of lanes that
    have a capacity, in hundredths; ``costs`` "ties" draws lanes from five costs only.
    """

    warehouses: int
    ship_tos: int
    seed: int
    supply_ratio: int = 120
    capped: int = 0
    costs: Costs = "distance"

    @property
    def lanes(self) -> int:
        """Return the number of lanes."""
        return self.warehouses * self.ship_tos

    @property
    def kind(self) -> str:
        """Return what is special about the network, in words."""
        if self.capped:
            return f"{self.capped} % of lanes capped"
        if self.costs == "ties":
            return "ties"
        return {120: "dense", 100: "supply = demand"}.get(self.supply_ratio, "short supply")

    @property
    def name(self) -> str:
        """Return size, kind and seed."""
        return f"{self.warehouses} x {self.ship_tos:,}, {self.kind}, seed {self.seed}"


@dataclass(frozen=True, slots=True, kw_only=True)
class Dense:
    """A network in which every warehouse reaches every ship-to.

    ``cost`` (in cents) and ``capacity`` (``UNLIMITED``: none) have shape (warehouses, ship_tos),
    ``supply`` and ``demand`` the shape of one axis; all int64, in units.
    """

    cost: IntArray
    capacity: IntArray
    supply: IntArray
    demand: IntArray


def dense(recipe: Recipe) -> Dense:
    """Draw the network of ``recipe``."""
    if recipe.seed < SEED_MIN:
        raise ValueError(f"seeds below {SEED_MIN} were tuned on; they measure nothing")
    draw = np.random.default_rng(recipe.seed)
    shape = (recipe.warehouses, recipe.ship_tos)
    places = draw.random((recipe.warehouses, 2)) * 1000
    towns = draw.random((_TOWNS, 2)) * 1000
    around = recipe.ship_tos * 6 // 10
    ship_tos = np.concatenate(
        (
            towns[draw.integers(0, _TOWNS, around)] + draw.normal(0, 15, (around, 2)),
            draw.random((recipe.ship_tos - around, 2)) * 1000,
        )
    )
    distance = np.hypot(
        places[:, None, 0] - ship_tos[None, :, 0], places[:, None, 1] - ship_tos[None, :, 1]
    )
    handling = 20 + 100 * draw.random(recipe.warehouses)
    euros = distance * (1 + 0.15 * draw.random(shape)) + handling[:, None]
    cost = np.rint(euros * CENTS).astype(np.int64)
    if recipe.costs == "ties":
        cost = draw.integers(1, 6, shape) * CENTS
    demand = np.maximum(1, np.rint(draw.lognormal(3, 0.8, recipe.ship_tos))).astype(np.int64)
    supply = _supply(draw.lognormal(0, 0.5, recipe.warehouses), int(demand.sum()), recipe)
    capacity = np.full(shape, UNLIMITED, np.int64)
    if recipe.capped:
        capped = draw.random(shape) < recipe.capped / 100
        part = draw.random(shape) * 0.8
        capacity[capped] = np.maximum(1, (demand[None, :] * part).astype(np.int64))[capped]
    return Dense(cost=cost, capacity=capacity, supply=supply, demand=demand)


def _supply(weights: NDArray[np.float64], wanted: int, recipe: Recipe) -> IntArray:
    """Return stock in proportion to ``weights`` that adds up to its part of ``wanted`` exactly."""
    whole = wanted * recipe.supply_ratio // 100
    supply: IntArray = np.floor(weights / weights.sum() * whole).astype(np.int64)
    supply[: whole - int(supply.sum())] += 1
    return supply


def tomorrow(network: Dense, change: Change, *, seed: int) -> Dense:
    """Return ``network`` a day later."""
    draw = np.random.default_rng((seed, 1))
    if change == "outage":
        supply = network.supply.copy()
        supply[int(supply.argmax())] //= 2
        return replace(network, supply=supply)
    if change == "costs 5 %":
        moved = network.cost * draw.uniform(0.95, 1.05, network.cost.shape)
        return replace(network, cost=np.rint(moved).astype(np.int64))
    spread = {"demand 10 %": 0.1, "demand 50 %": 0.5}[change]
    moved = network.demand * draw.uniform(1 - spread, 1 + spread, network.demand.shape)
    return replace(network, demand=np.maximum(1, np.rint(moved)).astype(np.int64))
