"""A relaxation from few columns and limits ends where the whole one does."""

from typing import Any

import numpy as np
import pytest

from service.planning.coupled.certified_bound import least_cost
from service.planning.coupled.linear_program import Rows, relaxed_optimum
from service.planning.coupled.priced_columns import priced_optimum
from service.planning.coupled.program import CoupledProgram, coupled_program, shortage_grid
from service.planning.flow.prices import reduced_cost
from tests.factories import network_document
from tests.unit.planning.routing import compiled


def network(seed: int, *, origins: int = 4, destinations: int = 30) -> dict[str, Any]:
    """Return three items with random costs, lanes with room for some of it, and narrow doors."""
    rng = np.random.default_rng(seed)
    items = [
        {"id": f"I{at}", "unit": "bag", "weight_kg": str(kg)} for at, kg in enumerate((5, 8, 20))
    ]
    wanted = rng.integers(1, 20, (destinations, len(items)))
    weight = (wanted * np.array([5, 8, 20])).sum()
    return network_document(
        items=items,
        sites=[
            *({"id": f"W{at}", "roles": ["warehouse"]} for at in range(origins)),
            *({"id": f"S{at}", "roles": ["ship_to"]} for at in range(destinations)),
        ],
        supply=[
            {"site": f"W{at}", "item": item["id"], "quantity": "400"}
            for at in range(origins)
            for item in items
        ],
        demand=[
            {
                "reference": f"{site}/{at}",
                "site": f"S{site}",
                "item": item["id"],
                "quantity": str(wanted[site, at]),
            }
            for site in range(destinations)
            for at, item in enumerate(items)
        ],
        lanes=[
            {
                "origin": f"W{start}",
                "destination": f"S{end}",
                "measure": "weight_kg",
                "unit_cost": str(rng.integers(1, 100)),
                "capacity": str(rng.integers(200, 700)),
                "per": "together",
            }
            for start in range(origins)
            for end in range(destinations)
        ],
        rules=[
            {
                "rule": "throughput",
                "id": "DOORS",
                "sites": {"role": ["warehouse"]},
                "flow": "sent",
                "measure": "weight_kg",
                "maximum": str(int(weight * 1.3 / origins)),
                "per": "each",
            }
        ],
    )


def laid_out(document: dict[str, Any]) -> CoupledProgram:
    """Return the program of all items of a network."""
    made, _ = compiled(document)
    assert made.shared is not None
    return coupled_program(made.items, made.shared, shortage_grid(made.network, made.items))


@pytest.mark.parametrize("seed", range(5))
def test_columns_that_were_never_shown_would_not_have_helped(seed: int) -> None:
    """The optimum is that over all columns and limits, and no column left out has a gain."""
    program = laid_out(network(seed))
    objective = [own.arcs.cost for own in program.items]
    costs = program.columns(objective)
    free = np.zeros(len(program.priorities), np.int64)
    lower = np.concatenate((program.limits.lower, free - 2**62))
    upper = np.concatenate((program.limits.upper, free))
    need = np.zeros(program.nodes, np.int64)
    rows = Rows.of(program.balance, need, program.numbers, lower, upper)
    alone = [least_cost(own, own.weighted()) for own in program.items]
    reduced = [
        reduced_cost(own.arcs.with_cost(own.weighted()), price)
        for own, (_, price) in zip(program.items, alone, strict=True)
    ]

    whole = relaxed_optimum(costs, program.minimum, program.capacity, rows)
    found = priced_optimum(
        program,
        costs,
        program.capacity,
        lower=lower,
        upper=upper,
        alone=program.on_columns([flow for flow, _ in alone]),
        reduced=program.on_columns(reduced).astype(np.float64),
    )

    assert found is not None
    assert found.value @ costs == pytest.approx(whole.value @ costs, rel=1e-9)
    assert (rows.matrix @ found.value <= rows.upper + 1e-6).all()
    assert found.reduced[found.value == 0].min() > -1e-5
