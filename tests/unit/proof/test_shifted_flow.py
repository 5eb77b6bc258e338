"""Prices that prove a flow refuse every dearer one, on real networks."""

from fractions import Fraction
from random import Random

import networkx as nx
import numpy as np
import orjson

from service.network.options import Options
from service.proof.arcs import ItemArcs, item_arcs
from service.proof.calendar import calendar_of
from service.proof.costs import scaled_costs
from service.proof.feasibility import broken_limits
from service.proof.flows import Names, item_flows
from service.proof.rulings import Rulings
from service.proof.slackness import contradictions, weighted
from service.proof.violations import Findings
from tests.evidence.zips import entries_of, good_zip, network_of

SEEDS = range(24)


def residual(arcs: ItemArcs, flow: list[int]) -> "nx.DiGraph[int]":
    """Return where one more step could go: (arc, +1 or -1) for each ordered pair of nodes."""
    graph: nx.DiGraph[int] = nx.DiGraph()
    ends = zip(arcs.tails().tolist(), arcs.heads().tolist(), strict=True)
    limits = zip(arcs.minimums().tolist(), arcs.capacities().tolist(), strict=True)
    for at, ((tail, head), (least, most)) in enumerate(zip(ends, limits, strict=True)):
        if most < 0 or flow[at] < most:
            graph.add_edge(tail, head, step=(at, 1))
        if flow[at] > least:
            graph.add_edge(head, tail, step=(at, -1))
    return graph


def test_step_around_a_cycle_is_refused_exactly_if_it_costs_more() -> None:
    """Every shifted flow is feasible; the same prices accept it only if it costs the same.

    What it costs is counted here, weights included; a cheaper one would refute the proof.
    """
    tried = [_shift(seed) for seed in SEEDS]

    # Small networks may have no other way at all; most have several.
    assert sum(tried) > 100
    assert sum(map(bool, tried)) > len(SEEDS) // 2


def _shift(seed: int) -> int:
    """Shift a step around cycles of one network, check each, and return how many there were."""
    entries = entries_of(good_zip(seed))
    network = network_of(entries)
    options = Options.from_document(orjson.loads(entries["options.json"]))
    plan, certificate = (
        orjson.loads(entries["plan.json"]),
        orjson.loads(entries["certificate.json"]),
    )
    rng = Random(seed)  # noqa: S311 - a test that repeats
    names, findings = Names(calendar_of(network)), Findings()
    lines = names.plan_lines(plan["plan_lines"], findings)
    assert lines is not None
    tried = 0
    for item, proof in enumerate(certificate.get("items", [])):
        arcs = item_arcs(network, options, Rulings.of(network), item)
        own = [line for line in lines if line.row >= 0 and line.item == item]
        flow = item_flows(arcs, own, proof, names=names, findings=findings)
        money = scaled_costs(network, arcs, Fraction(certificate["cost_scale"]))
        assert flow is not None
        assert money is not None
        cost = weighted(arcs, money, int(proof["base"]))
        places = {
            (names.sites[entry["site"]], entry["side"], entry["qualifier"]): int(entry["price"])
            for entry in proof["prices"]
        }
        price = np.array([places.get(node, 0) for node in arcs.nodes], dtype=object)
        graph = residual(arcs, flow.tolist())
        for cycle in _some_cycles(graph, rng):
            shifted = flow.astype(object)
            for tail, head in zip(cycle, cycle[1:] + cycle[:1], strict=True):
                at, sign = graph.edges[tail, head]["step"]
                shifted[at] += sign
            added = int(((shifted - flow) * np.concatenate(cost)).sum())

            refused = contradictions(arcs, shifted, cost=cost, price=price)

            assert not len(broken_limits(arcs, shifted))
            assert added >= 0
            assert bool(len(refused)) == (added > 0)
            tried += 1
    return tried


def _some_cycles(graph: "nx.DiGraph[int]", rng: Random) -> list[list[int]]:
    """Return a few simple cycles over more than one arc, each through an edge drawn at random."""
    cycles = []
    edges = sorted(graph.edges)
    for tail, head in rng.sample(edges, min(12, len(edges))):
        back = graph.copy()
        back.remove_edges_from([(head, tail)])
        if nx.has_path(back, head, tail):
            cycles.append([tail, *nx.shortest_path(back, head, tail)[:-1]])
    return cycles
