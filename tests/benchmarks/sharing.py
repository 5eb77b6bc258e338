"""Items that share lane weight and doors: ours, whole and bounded, beside HiGHS on the relaxation.

    python -m tests.benchmarks.sharing [SEED ...]

Prints CPU seconds and their ratio for each seed: 30 warehouses, 800 places, 5 items. What is ours
compiles, plans in whole steps and bounds exactly; HiGHS gets the relaxation alone, as matrices.
"""

import sys
import tempfile
import time
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
import orjson
from numpy.typing import NDArray
from scipy.optimize import linprog
from scipy.sparse import csr_array, vstack

from service.network.canonical import read_network
from service.network.options import read_options
from service.planning.model.compile import compile_network
from service.planning.solution import solve_all
from service.planning.solve import solve_item
from tests.factories import Document, take_in

WEIGHTS_KG = (25, 10, 40, 5, 18)
FULL_SIZE = (30, 800, 5)


@dataclass(frozen=True, slots=True, kw_only=True)
class Instance:
    """A drawn problem: kilograms and bags; ``rate`` in cents a kilogram, shape (origins, ends)."""

    rate: NDArray[np.int64]
    room: NDArray[np.int64]
    supply: NDArray[np.int64]
    demand: NDArray[np.int64]
    door: int

    @property
    def weight(self) -> NDArray[np.int64]:
        """The kilograms of a bag of each item."""
        return np.array(WEIGHTS_KG[: self.demand.shape[1]], np.int64)


def drawn(seed: int, *, origins: int, ends: int, items: int) -> Instance:
    """Draw places on a square; lanes and doors have less room than nearness would fill."""
    rng = np.random.default_rng(seed)
    weight = np.array(WEIGHTS_KG[:items])
    start, end = rng.random((origins, 2)), rng.random((ends, 2))
    distance = np.hypot(*(start[:, None] - end[None]).transpose(2, 0, 1))
    demand = rng.integers(5, 60, (ends, items))
    supply = np.ceil(demand.sum(0) * 1.25 / origins * rng.uniform(0.8, 1.2, (origins, items)))
    supply[0] += np.maximum(0, demand.sum(0) - supply.sum(0)) + 1
    typical = float(np.median((demand * weight).sum(1)))
    return Instance(
        rate=np.rint(distance * 1000 + rng.random((origins, ends)) * 50).astype(np.int64) + 1,
        room=np.rint(rng.uniform(0.6, 1.5, (origins, ends)) * typical).astype(np.int64),
        supply=supply.astype(np.int64),
        demand=demand,
        door=int(np.ceil((demand * weight).sum() / origins * 1.3)),
    )


def as_document(one: Instance) -> Document:
    """Return the network that a client would send."""
    origins = [f"W{at:03d}" for at in range(one.rate.shape[0])]
    ends = [f"S{at:04d}" for at in range(one.rate.shape[1])]
    items = [f"I{at}" for at in range(one.demand.shape[1])]
    return {
        "format": 1,
        "currency": "EUR",
        "cut_off": "2026-02-03T16:00:00+01:00",
        "items": [
            {"id": item, "unit": "bag", "weight_kg": str(kilograms)}
            for item, kilograms in zip(items, one.weight.tolist(), strict=True)
        ],
        "sites": [
            *({"id": site, "roles": ["warehouse"]} for site in origins),
            *({"id": site, "roles": ["ship_to"]} for site in ends),
        ],
        "supply": [
            {"site": site, "item": item, "quantity": str(one.supply[at, number])}
            for at, site in enumerate(origins)
            for number, item in enumerate(items)
        ],
        "demand": [
            {
                "reference": f"{site}/{item}",
                "site": site,
                "item": item,
                "quantity": str(one.demand[at, number]),
            }
            for at, site in enumerate(ends)
            for number, item in enumerate(items)
        ],
        "lanes": {
            "origins": origins,
            "destinations": ends,
            "unit_cost": [[f"{cents / 100:.2f}" for cents in row] for row in one.rate.tolist()],
            "measure": "weight_kg",
            "capacity": [[str(kilograms) for kilograms in row] for row in one.room.tolist()],
            "per": "together",
        },
        "rules": [
            {
                "rule": "throughput",
                "id": "DOORS",
                "sites": {"role": ["warehouse"]},
                "flow": "sent",
                "measure": "weight_kg",
                "maximum": str(one.door),
                "per": "each",
            }
        ],
    }


def by_highs(one: Instance) -> tuple[float, float]:
    """Return CPU seconds and least cost of the relaxation, by HiGHS through SciPy."""
    origins, ends = one.rate.shape
    items = one.demand.shape[1]
    columns = np.arange(origins * ends * items)
    start, rest = np.divmod(columns, ends * items)
    end, item = np.divmod(rest, items)
    ones, kilograms = np.ones(columns.shape[0]), one.weight[item].astype(np.float64)
    cost = one.rate[start, end] / 100 * kilograms

    def rows(values: Any, row: Any, count: int) -> csr_array:  # noqa: ANN401 - columns of a matrix
        return csr_array((values, (row, columns)), shape=(count, columns.shape[0]))

    began = time.process_time()
    at_most = vstack(
        (
            rows(ones, start * items + item, origins * items),
            rows(kilograms, start, origins),
            rows(kilograms, start * ends + end, origins * ends),
        )
    )
    found = linprog(  # type: ignore[call-overload]  # stubs lack sparse
        cost,
        A_ub=at_most,
        b_ub=np.concatenate((one.supply.ravel(), np.full(origins, one.door), one.room.ravel())),
        A_eq=rows(ones, end * items + item, ends * items),
        b_eq=one.demand.ravel(),
        method="highs",
    )
    assert found.status == 0, found.message
    return time.process_time() - began, float(found.fun)


def by_us(one: Instance) -> tuple[float, Fraction, Fraction]:
    """Return CPU seconds from the read network to a bounded plan, its cost and the bound."""
    options, _ = read_options({})
    assert options is not None
    with tempfile.TemporaryDirectory() as name:
        take_in(orjson.dumps(as_document(one)), Path(name), options)
        network = read_network(Path(name) / "network.zip")
    began = time.process_time()
    made = compile_network(network, options)
    solution, _ = solve_all(made, lambda own: solve_item(network, own))
    seconds = time.process_time() - began
    last = solution.coupled[0].steps[-1]
    assert all(step.achieved == 0 for step in solution.coupled[0].steps[:-1]), "nothing is short"
    return seconds, last.achieved / made.cost_scale, last.bound / made.cost_scale


def main(seeds: list[str]) -> None:
    """Print a line for each seed."""
    for seed in map(int, seeds or ["1", "2", "3"]):
        origins, ends, items = FULL_SIZE
        one = drawn(seed, origins=origins, ends=ends, items=items)
        highs, _ = by_highs(one)
        ours, cost, bound = by_us(one)
        gap = float((cost - bound) / bound)
        print(f"{seed}: HiGHS {highs:.2f} s, ours {ours:.2f} s, {ours / highs:.2f}; gap {gap:.1e}")  # noqa: T201 - what it is for


if __name__ == "__main__":
    main(sys.argv[1:])
