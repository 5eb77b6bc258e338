"""NETGEN networks through the whole pipeline: Klingman, Napier and Stutz; Klingman and Mote.

*Management Science* 20(5), 1974 (``klingman74-*``: the paper's parameters with largest arc cost
10,000 or 100) and Klingman and Mote 1987 (``klingmanmote87-*``). The files in ``data`` are in the
DIMACS minimum-cost-flow format; every optimum was found by OR-Tools and by the network simplex of
LEMON, with an exact certificate. The letter beside each says how it is known as published:
A seen in print or in a test suite, B recalled from memory and reproduced, C computed only.
"""

import gzip
import json
from fractions import Fraction
from pathlib import Path
from typing import NamedTuple

import pytest

from service.planning.solve import solve_item
from service.planning.wide import sifting
from tests.factories import Arc, Document, flow_network, plan_network
from tests.unit.planning.routing import Seen, compiled, documents

DATA = Path(__file__).parent / "data"


class Instance(NamedTuple):
    """One generated network: what the generator was asked for, and its optimum."""

    name: str
    seed: int
    nodes: int
    sources: int
    sinks: int
    arcs: int
    supply: int
    optimum: int
    known: str


INSTANCES = [
    Instance("klingman74-01-c10000", 13502460, 200, 100, 100, 1308, 100_000, 196_587_626, "B"),
    Instance("klingman74-05-c100", 13502460, 200, 100, 100, 2900, 100_000, 1_374_153, "C"),
    Instance("klingman74-11-c10000", 13502460, 400, 200, 200, 1500, 200, 473_532, "C"),
    # The optimum is also asserted by the tests of networkx 3.6.1, which ship the same network.
    Instance("klingman74-20-c10000", 13502460, 400, 8, 60, 1416, 400_000, 6_749_969_302, "A"),
    Instance("klingman74-24-c100", 13502460, 400, 4, 12, 1382, 400_000, 80_022_555, "C"),
    Instance("klingmanmote87-101", 13502460, 5000, 2500, 2500, 25336, 250_000, 6_191_726, "B"),
    Instance("klingmanmote87-110", 92480414, 5000, 2500, 2500, 12825, 250_000, 8_975_048, "B"),
    Instance("klingmanmote87-121", 72707401, 5000, 50, 50, 25000, 250_000, 66_366_360, "B"),
]


def read_dimacs(name: str) -> tuple[dict[str, int], dict[str, int], list[Arc]]:
    """Return supply, demand and arcs of a minimum-cost-flow file; its lower bounds are all zero."""
    supply: dict[str, int] = {}
    demand: dict[str, int] = {}
    arcs: list[Arc] = []
    with gzip.open(DATA / f"{name}.min.gz", "rt", encoding="ascii") as file:
        for line in file:
            kind, *fields = line.split() or ["c"]
            if kind == "n":
                node, amount = fields[0], int(fields[1])
                (supply if amount > 0 else demand)[node] = abs(amount)
            elif kind == "a":
                start, end, least, most, cost = fields
                assert least == "0"
                arcs.append((start, end, int(cost), int(most)))
    return supply, demand, arcs


def netgen_document(case: Instance) -> Document:
    """Return the network definition of a file, after a check that the file is the table's."""
    supply, demand, arcs = read_dimacs(case.name)
    assert (len(supply), len(arcs)) == (case.sources, case.arcs)
    # Where the generator drew a demand of 0 the file has no line for the sink.
    assert len(demand) <= case.sinks
    assert sum(supply.values()) == sum(demand.values()) == case.supply
    return flow_network(dict(supply), dict(demand), arcs)


@pytest.mark.parametrize("case", INSTANCES, ids=lambda case: case.name)
def test_least_cost_equals_the_known_optimum(case: Instance) -> None:
    """All supply leaves because as much is wanted, and every arc keeps its number as an id."""
    planned = plan_network(netgen_document(case), shortages="forbid")

    assert planned.total_cost == case.optimum
    assert planned.gap == 0
    assert all(Fraction(use["left"]) == 0 for use in planned.plan["site_use"])


@pytest.mark.parametrize("case", INSTANCES, ids=lambda case: case.name)
def test_short_lists_end_with_the_known_optimum_after_some_rounds(
    case: Instance, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Two arcs a node are too few at first; without the full solve they become enough."""
    for name in ("LISTED_LANES", "TIGHT_LANES"):
        monkeypatch.setattr(sifting, name, 2.2)
    seen = Seen()
    made, _ = compiled(netgen_document(case))

    flows = [solve_item(made.network, own, front=seen.front()) for own in made.items]

    plan, certificate = (json.loads(document) for document in documents(made, flows))
    assert plan["shortages"] == []
    assert Fraction(certificate["total_cost"]) == case.optimum
    assert seen.sifted == [True]
    assert len(seen.rounds) > 2
