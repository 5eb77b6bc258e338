"""Ties between plans of least cost are broken by names, whatever way led to the tie."""

import hashlib

import numpy as np
from scipy.optimize import linprog

from service.network.columns import IntArray
from service.planning.flow.canonical_plan import canonical_flow, tied_arcs
from service.planning.flow.contraction import contract
from service.planning.flow.min_cost_flow import least_cost_flow
from service.planning.flow.prices import residual_prices
from service.planning.flow.tie_break import tie_weight
from service.planning.model.arcs import Arcs
from service.planning.model.limits import NoFlowError
from tests.unit.planning.formal import arcs_of, cost_of, random_arcs


def by_position(positions: IntArray) -> tuple[IntArray, IntArray]:
    """Name every arc after its position."""
    weights = [tie_weight("lane", str(position)) for position in positions]
    return np.array(weights, np.int64), positions


def test_weight_is_one_more_than_the_first_20_bits() -> None:
    """SHA-256 of "lane", NUL, "A>B": the first five hexadecimal digits are 20 bits."""
    digits = hashlib.sha256(b"lane\0A>B").hexdigest()

    assert tie_weight("lane", "A>B") == 1 + int(digits[:5], 16)


def test_two_equal_ways_are_tied_and_a_lone_one_is_not() -> None:
    """Of 1->0, two alike and one dearer, the two may differ; what is wanted may not."""
    arcs = arcs_of([(0, 1, 2, 2, 0), (1, 0, 0, -1, 3), (1, 0, 0, -1, 3), (1, 0, 0, -1, 4)])
    flow = np.array([2, 2, 0, 0], np.int64)
    price = residual_prices(arcs, flow, nodes=2)

    assert tied_arcs(arcs, flow, price, nodes=2).tolist() == [1, 2]


def test_trees_hanging_off_loops_are_left_out() -> None:
    """0-1-2 is a chain of arcs between their bounds: bridges, so none of them can differ."""
    arcs = arcs_of([(0, 1, 0, 9, 1), (1, 2, 0, 9, 1), (2, 0, 5, 5, 0)])
    flow = np.array([5, 5, 5], np.int64)
    price = residual_prices(arcs, flow, nodes=3)

    assert tied_arcs(arcs, flow, price, nodes=3).tolist() == []


def test_canonical_flow_has_the_least_weight_of_all_optimal_flows() -> None:
    """Cost unchanged and weight minimal, by a linear program over the optimal face (HiGHS)."""
    rng = np.random.default_rng(2)
    moved = 0
    for _ in range(80):
        arcs, nodes = random_arcs(rng, costs=4)
        whole = contract(arcs, nodes=nodes)
        left = whole.arcs(arcs.cost)
        try:
            first = least_cost_flow(left, nodes=whole.nodes)
        except NoFlowError:
            continue
        price = residual_prices(left, first, nodes=whole.nodes)

        settled = canonical_flow(whole, left, first, price, tie_break=by_position)

        moved += not np.array_equal(first, settled)
        flow = whole.flow(settled)
        assert cost_of(arcs, flow) == cost_of(arcs, whole.flow(first))
        weights, _ = by_position(np.arange(len(arcs)))
        incidence = np.zeros((nodes, len(arcs)))
        for at in range(len(arcs)):
            incidence[arcs.head[at], at] += 1
            incidence[arcs.tail[at], at] -= 1
        face = linprog(
            weights,
            A_eq=np.vstack([incidence, arcs.cost[None]]),
            b_eq=np.append(np.zeros(nodes), cost_of(arcs, flow)),
            bounds=[
                (least, None if most < 0 else most)
                for least, most in zip(arcs.minimum, arcs.capacity, strict=True)
            ],
            method="highs",
        )
        assert face.fun is not None
        assert abs(face.fun - float((weights * flow).sum())) < 0.5
    assert moved > 3


def test_start_and_order_of_arcs_leave_no_trace() -> None:
    """From the arcs in any order the same flow results, arc by arc."""
    rng = np.random.default_rng(9)
    for _ in range(40):
        arcs, nodes = random_arcs(rng, costs=2)
        order = rng.permutation(len(arcs))
        try:
            plain = _settled(arcs, nodes, np.arange(len(arcs)))
        except NoFlowError:
            continue

        shuffled = _settled(arcs.at(order), nodes, order)

        assert shuffled.tolist() == plain[order].tolist()


def _settled(arcs: Arcs, nodes: int, names: IntArray) -> IntArray:
    """Return the canonical flow of arcs that are called by ``names``."""
    whole = contract(arcs, nodes=nodes)
    left = whole.arcs(arcs.cost)
    flow = least_cost_flow(left, nodes=whole.nodes)
    price = residual_prices(left, flow, nodes=whole.nodes)
    settled = canonical_flow(
        whole, left, flow, price, tie_break=lambda positions: by_position(names[positions])
    )
    return whole.flow(settled)
