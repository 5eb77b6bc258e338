"""How much can come to a place is found from as little of a network as decides it."""

import networkx as nx
import numpy as np

from service.planning.documents.ways import Ways


def test_flow_equals_that_of_the_whole_network() -> None:
    """Against networkx on random graphs, up to what is enough, its own shortage counted or not."""
    rng = np.random.default_rng(4)
    for _ in range(60):
        nodes = int(rng.integers(3, 12))
        count = int(rng.integers(2, 30))
        tail, head = rng.integers(0, nodes, count), rng.integers(0, nodes, count)
        room = rng.integers(0, 6, count)
        enough = int(rng.integers(1, 12))
        for counted in (True, False):
            shortage = (tail == 0) & (head == 1)
            graph = nx.DiGraph()
            graph.add_nodes_from(range(nodes))
            for start, end, most in zip(tail.tolist(), head.tolist(), room.tolist(), strict=True):
                if not counted and (start, end) == (0, 1):
                    continue
                former = graph.edges[start, end]["capacity"] if graph.has_edge(start, end) else 0
                graph.add_edge(start, end, capacity=former + most)
            expected = min(enough, nx.maximum_flow_value(graph, 0, 1))

            ways = Ways(tail, head, room, nodes=nodes, shortage=None if counted else shortage)
            found = ways.most(1, enough=enough)

            assert found == expected


def test_what_lies_before_a_place() -> None:
    """0->1->2 and 3 apart; an arc without room leads nowhere."""
    ways = Ways(np.array([0, 1, 3]), np.array([1, 2, 2]), np.array([1, 1, 0]), nodes=4)

    assert ways.before(2).tolist() == [True, True, True, False]
    assert sorted(ways.sources(np.array([1, 2])).tolist()) == [0, 1]
