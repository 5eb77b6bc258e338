"""Two printed assignment problems: every job one machine, every machine one job.

The 4 x 4 matrix is the example on the help page of ``lp.assign`` in the R package lpSolve; the
5 x 5 one the assignment example in the lp_solve reference guide, on its page about the DIMACS
assignment format. Status A: matrices and optima seen in the distributed packages.
"""

import pytest

from tests.factories import cost_table, plan_network, transportation_network

HELP_PAGE_MATRIX = [[2, 7, 7, 1], [7, 7, 2, 9], [7, 3, 8, 8], [2, 2, 10, 2]]
HELP_PAGE_COST = 8
REFERENCE_GUIDE_MATRIX = [
    [22, 30, 26, 16, 25],
    [27, 29, 28, 20, 32],
    [33, 25, 21, 29, 23],
    [24, 24, 30, 19, 26],
    [30, 33, 32, 37, 31],
]
REFERENCE_GUIDE_COST = 118


@pytest.mark.parametrize(
    ("matrix", "published_cost"),
    [(HELP_PAGE_MATRIX, HELP_PAGE_COST), (REFERENCE_GUIDE_MATRIX, REFERENCE_GUIDE_COST)],
    ids=["help page", "reference guide"],
)
def test_assignment_costs_the_published_optimum(
    matrix: list[list[int]], published_cost: int
) -> None:
    """One whole unit from each and to each: the network answers with an assignment."""
    jobs = [f"job {number}" for number in range(len(matrix))]
    machines = [f"machine {number}" for number in range(len(matrix))]
    network = transportation_network(
        dict.fromkeys(jobs, 1), dict.fromkeys(machines, 1), cost_table(jobs, machines, matrix)
    )

    planned = plan_network(network, shortages="forbid")

    assert planned.total_cost == published_cost
    assert planned.gap == 0
    moves = planned.moves()
    assert sorted(start for start, _ in moves) == jobs
    assert sorted(end for _, end in moves) == machines
    assert set(moves.values()) == {1}
