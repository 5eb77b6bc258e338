"""The linear program of items that share limits, in floating point: a start that decides nothing.

What comes out of here is put into whole steps and certified exactly by others.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from ortools.linear_solver.python import model_builder_helper as engine
from scipy.sparse import csr_array, csr_matrix, diags_array, hstack, vstack

from service.network.columns import IntArray
from service.planning.model.arcs import UNLIMITED, MoneyArray
from service.planning.model.limits import NoFlowError, SolverFaultError
from service.planning.model.shared_limits import NO_LEAST, NO_MOST

FloatArray = NDArray[np.float64]

# Of the size of the largest cost: what GLOP calls optimal then leaves reduced costs of a part in
# 10**10, far below what one step of any arc costs.
COST_SIZE = 1000.0
# GLOP with its own settings but for these. Its default tolerances are absolute: 1e-8 of bounds
# that are whole steps, 1e-6 of costs of COST_SIZE.
GLOP_PARAMETERS = "use_dual_simplex: true dual_feasibility_tolerance: 1e-7"

# Where that ends without an answer, which was not seen yet: the other simplex, nothing presolved.
GLOP_WITH_CARE = "use_dual_simplex: false use_preprocessing: false"
# One thread and one seed, so that equal input gives equal plans.
SCIP_PARAMETERS = "randomization/randomseedshift = 0\nparallel/maxnthreads = 1\nlimits/gap = 0\n"


@dataclass(frozen=True, slots=True, kw_only=True)
class Rows:
    """``lower`` <= ``matrix`` @ x <= ``upper``; infinities where there is no limit.

    ``size`` is what each row was divided by.
    """

    matrix: csr_array
    lower: FloatArray
    upper: FloatArray
    size: FloatArray

    @staticmethod
    def of(
        balance: csr_array, need: IntArray, numbers: csr_array, lower: IntArray, upper: IntArray
    ) -> "Rows":
        """Return rows of places (``balance`` @ x = ``need``) and, below them, of limits.

        Those of limits are divided by their largest number, so that one tolerance fits all.
        """
        largest = abs(numbers).max(axis=1).toarray().ravel().astype(np.float64)
        size = np.maximum(largest, 1.0)
        scaled = diags_array(1.0 / size) @ numbers.astype(np.float64)
        exact = need.astype(np.float64)
        return Rows(
            matrix=csr_array(vstack((balance.astype(np.float64), scaled))),
            lower=np.concatenate((exact, np.where(lower == NO_LEAST, -np.inf, lower / size))),
            upper=np.concatenate((exact, np.where(upper == NO_MOST, np.inf, upper / size))),
            size=np.concatenate((np.ones(exact.shape[0]), size)),
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Relaxed:
    """An optimum of the relaxation: a value for each column, a dual value for each row.

    A dual value is what the objective gains by one more on the right hand side.
    """

    value: FloatArray
    dual: FloatArray
    reduced: FloatArray


def relaxed_optimum(cost: MoneyArray, minimum: IntArray, capacity: IntArray, rows: Rows) -> Relaxed:
    """Minimise ``cost`` @ x for ``minimum`` <= x <= ``capacity`` and ``rows`` by GLOP.

    Raises
    ------
    NoFlowError
        There is no such x.
    SolverFaultError
        GLOP ended with anything but an optimum.
    """
    model, size = _model(cost, minimum, capacity, rows)
    solver = engine.ModelSolverHelper("glop")
    status = None
    for parameters in (GLOP_PARAMETERS, GLOP_WITH_CARE):
        solver.set_solver_specific_parameters(parameters)
        solver.solve(model)
        status = solver.status()
        if status in {engine.SolveStatus.INFEASIBLE, engine.SolveStatus.OPTIMAL}:
            break
    if status == engine.SolveStatus.INFEASIBLE:
        raise NoFlowError
    if status != engine.SolveStatus.OPTIMAL:
        raise SolverFaultError(f"GLOP ended with {status}")
    return Relaxed(
        value=np.asarray(solver.variable_values(), np.float64),
        dual=np.asarray(solver.dual_values(), np.float64) * size / rows.size,
        reduced=np.asarray(solver.reduced_costs(), np.float64) * size,
    )


def least_violation(
    minimum: IntArray, capacity: IntArray, rows: Rows, *, places: int
) -> tuple[float, FloatArray]:
    """Return by how much rows must be broken at least, in sum, and dual values of limits.

    The first ``places`` rows are balances, which must hold; only those after them may be broken.
    Rows are measured in their own ``size``.
    """
    count, columns = rows.lower.shape[0] - places, minimum.shape[0]
    over = np.flatnonzero(np.isfinite(rows.upper[places:])) + places
    under = np.flatnonzero(np.isfinite(rows.lower[places:])) + places
    slack = over.shape[0] + under.shape[0]
    elastic = csr_array(
        (
            np.concatenate((np.full(over.shape[0], -1.0), np.ones(under.shape[0]))),
            (np.concatenate((over, under)), np.arange(slack)),
        ),
        shape=(count + places, slack),
    )
    found = relaxed_optimum(
        np.concatenate((np.zeros(columns, np.int64), np.ones(slack, np.int64))),
        np.concatenate((minimum, np.zeros(slack, np.int64))),
        np.concatenate((capacity, np.full(slack, UNLIMITED))),
        Rows(
            matrix=csr_array(hstack((rows.matrix, elastic))),
            lower=rows.lower,
            upper=rows.upper,
            size=rows.size,
        ),
    )
    return float(found.value[columns:].sum()), found.dual[places:]


def whole_optimum(
    cost: MoneyArray, minimum: IntArray, capacity: IntArray, rows: Rows, *, nodes_max: int
) -> IntArray | None:
    """Return whole numbers that minimise ``cost`` @ x as far as ``nodes_max`` nodes lead.

    None where no such numbers were found.
    """
    model, _ = _model(cost, minimum, capacity, rows)
    for column in range(cost.shape[0]):
        model.set_var_integrality(column, True)  # noqa: FBT003 - the engine's own signature
    solver = engine.ModelSolverHelper("scip")
    solver.set_solver_specific_parameters(SCIP_PARAMETERS + f"limits/totalnodes = {nodes_max}\n")
    solver.solve(model)
    if not solver.has_solution():
        return None
    return np.rint(np.asarray(solver.variable_values(), np.float64)).astype(np.int64)


def _model(
    cost: MoneyArray, minimum: IntArray, capacity: IntArray, rows: Rows
) -> tuple[Any, float]:
    """Return the model as OR-Tools holds it, and what its costs were divided by."""
    costs = np.asarray(cost, np.float64)
    size = (float(np.abs(costs).max(initial=0.0)) or 1.0) / COST_SIZE
    model: Any = engine.ModelBuilderHelper()
    model.fill_model_from_sparse_data(
        minimum.astype(np.float64),
        np.where(capacity == UNLIMITED, np.inf, capacity.astype(np.float64)),
        costs / size,
        rows.lower,
        rows.upper,
        csr_matrix(rows.matrix),
    )
    return model, size
