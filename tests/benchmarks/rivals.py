"""Other solvers on the bare problem. OR-Tools' full solve is the measure of everything: R."""

from collections.abc import Callable, Mapping
from typing import Any, Final

import numpy as np
from ortools.graph.python import min_cost_flow

from tests.benchmarks.problems import Problem

# Each returns the objective of an optimum, exactly: the flow is read and added up in whole numbers.
Solver = Callable[[Problem], int]


def ortools_full(problem: Problem) -> int:
    """Solve over all arcs with OR-Tools' SimpleMinCostFlow; the arcs are NumPy columns already."""
    solver = min_cost_flow.SimpleMinCostFlow()
    solver.add_arcs_with_capacity_and_unit_cost(
        problem.tail, problem.head, problem.capacity, problem.cost
    )
    solver.set_nodes_supplies(np.arange(problem.nodes, dtype=np.int32), problem.supply)
    status = solver.solve()
    if status != solver.OPTIMAL:
        raise RuntimeError(f"OR-Tools ended with {status}")
    flow = solver.flows(np.arange(problem.tail.shape[0], dtype=np.int32))
    return problem.objective(np.asarray(flow, np.int64))


def networkx_simplex(problem: Problem) -> int:
    """Solve with the network simplex of networkx, a Python object for each arc."""
    import networkx as nx  # noqa: PLC0415 - loading it would slow down every other child

    graph = nx.MultiDiGraph()
    graph.add_nodes_from(
        (node, {"demand": -supply}) for node, supply in enumerate(problem.supply.tolist())
    )
    columns = (problem.tail, problem.head, problem.capacity, problem.cost)
    graph.add_edges_from(
        (tail, head, {"capacity": capacity, "weight": cost})
        for tail, head, capacity, cost in zip(*(each.tolist() for each in columns), strict=True)
    )
    cost, _ = nx.network_simplex(graph)
    return int(cost)


def scipy_highs(problem: Problem) -> int:
    """Solve as a linear program with the dual simplex of HiGHS in SciPy.

    Its vertex is whole but for rounding; what is added up is the whole flow, checked to be one.
    """
    from scipy.optimize import linprog  # noqa: PLC0415 - likewise
    from scipy.sparse import csc_array  # noqa: PLC0415 - likewise

    arcs = np.arange(problem.tail.shape[0])
    balance = csc_array(
        (
            np.concatenate((np.ones(arcs.shape), -np.ones(arcs.shape))),
            (np.concatenate((problem.tail, problem.head)), np.concatenate((arcs, arcs))),
        ),
        shape=(problem.nodes, arcs.shape[0]),
    )
    # The stubs know dense matrices and lists of pairs only, which would be huge for nothing.
    matrix: Any = balance
    bounds: Any = np.column_stack((np.zeros(arcs.shape), problem.capacity))
    found = linprog(
        problem.cost.astype(np.float64),
        A_eq=matrix,
        b_eq=problem.supply.astype(np.float64),
        bounds=bounds,
        method="highs-ds",
    )
    if found.status != 0 or found.x is None:
        raise RuntimeError(f"HiGHS ended with {found.status}: {found.message}")
    return problem.objective(np.rint(found.x).astype(np.int64))


SOLVERS: Final[Mapping[str, Solver]] = {
    "OR-Tools": ortools_full,
    "networkx": networkx_simplex,
    "SciPy HiGHS": scipy_highs,
}
