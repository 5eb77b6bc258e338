"""The second judge: networkx's network simplex on split nodes, one priority after the other.

What is short of a priority comes through a hub of its own, whose inflow is first made as small as
can be and then capped there: no weights for priorities, no floating point.
"""

from collections.abc import Hashable, Iterable, Mapping
from fractions import Fraction

import networkx as nx

from tests.oracle_problem import ItemAnswer, ItemProblem, OracleLane, OracleLine

Node = tuple[Hashable, ...]
ROOT: Node = ("root",)


def solve_simplex(problem: ItemProblem, *, shortages: bool) -> ItemAnswer | None:
    """Return the best answer, priority by priority and then in money, or None without a plan."""
    achieved: dict[int, int] = {}
    for priority in problem.priorities():
        short = SplitNetwork(problem, shortages=shortages, caps=achieved).least(priority)
        if short is None:
            return None
        achieved[priority] = short
    cost = SplitNetwork(problem, shortages=shortages, caps=achieved).least(None)
    if cost is None:
        return None
    return ItemAnswer(
        item=problem.item,
        shortages={priority: steps * problem.step for priority, steps in achieved.items()},
        cost=Fraction(cost, problem.scale()),
    )


class SplitNetwork:
    """One item as a balanced network with lower bounds taken out."""

    def __init__(self, problem: ItemProblem, *, shortages: bool, caps: Mapping[int, int]) -> None:
        """Build all nodes and arcs; ``caps`` limits what may be short of the priorities in it."""
        self.problem = problem
        self.scale = problem.scale()
        self.graph = nx.MultiDiGraph()
        self.demand: dict[Node, int] = {ROOT: 0}
        self.fixed_cost = 0
        for priority in problem.priorities():
            self._arc(ROOT, ("hub", priority), most=caps.get(priority))
        self._add_stock(shortages=shortages)
        for site in problem.sites:
            self._add_site(site)
        for lane in problem.lanes:
            self._arc(
                self._leave(lane.origin),
                self._arrive(lane),
                cost=lane.cost,
                least=lane.least,
                most=lane.most,
            )
        for line in problem.lines:
            self._want(("line", line.reference), line.steps)
            if shortages:
                hub = ROOT if line.priority is None else ("hub", line.priority)
                if line.steps:
                    self._arc(hub, ("line", line.reference), cost=line.money or Fraction(0))

    def least(self, priority: int | None) -> int | None:
        """Return the least shortage of ``priority`` in steps, or the least scaled cost for None."""
        for node, demand in self.demand.items():
            self.graph.add_node(node, demand=demand)
        for start, end, data in self.graph.edges(data=True):
            counted = (start, end) == (ROOT, ("hub", priority))
            data["now"] = data["cost"] if priority is None else int(counted)
        try:
            value, _ = nx.network_simplex(self.graph, capacity="most", weight="now")
        except nx.NetworkXUnfeasible:
            return None
        return int(value) + (self.fixed_cost if priority is None else 0)

    def _arc(
        self,
        start: Node,
        end: Node,
        *,
        cost: Fraction = Fraction(0),
        least: int = 0,
        most: int | None = None,
    ) -> None:
        """Add an arc; its lower bound becomes a demand at its start and a supply at its end."""
        scaled = cost * self.scale
        assert scaled.denominator == 1, "costs are scaled to whole numbers first"
        room = {} if most is None else {"most": most - least}
        self.graph.add_edge(start, end, cost=int(scaled), **room)
        self.demand[start] = self.demand.get(start, 0) + least
        self.demand[end] = self.demand.get(end, 0) - least
        self.fixed_cost += int(scaled) * least

    def _want(self, node: Node, steps: int) -> None:
        self.demand[node] = self.demand.get(node, 0) + steps
        self.demand[ROOT] -= steps

    def _add_stock(self, *, shortages: bool) -> None:
        kept = {keep.site: keep for keep in self.problem.kept}
        for number, stock in enumerate(self.problem.stocks):
            node: Node = ("stock", stock.site, number)
            self._arc(ROOT, node, most=stock.steps)
            self._arc(node, ("drawn", stock.site), cost=stock.cost)
            if stock.site in kept:
                self._arc(node, ("kept", stock.site))
        for site, keep in kept.items():
            self._want(("kept", site), keep.steps)
            if shortages and keep.steps:
                self._arc(("hub", keep.priority), ("kept", site))

    def _add_site(self, site: str) -> None:
        """Join what arrives and what is drawn where both may do the same, else keep them apart."""
        if (site, "sent") in self.problem.limits:
            self._arc(("sent", site), ("left", site), most=self.problem.limits[site, "sent"])
        arriving = [lane for lane in self.problem.lanes if lane.destination == site]
        ways: dict[Node, tuple[frozenset[str] | None, bool]] = {}
        stocked = any(stock.site == site for stock in self.problem.stocks)
        dock = site in self.problem.cross_docks
        if self.problem.is_joined(site):
            self._arc(("arrived", site), ("joined", site), most=self._limit(site, "received"))
            self._arc(("drawn", site), ("joined", site))
            self._arc(("joined", site), ("passed", site), most=self._limit(site, "through"))
            ways["passed", site] = (None, dock or stocked)
        else:
            ways["drawn", site] = (frozenset([site]), True)
            for lane in arriving:
                ways["arrived", site, lane.origin] = (self.problem.stock_behind(lane), dock)
        for node, (origins, may_leave) in ways.items():
            # One node for each way in, so that handling is paid once by whatever passes.
            closed = 0 if site in self.problem.closed else None
            self._arc(node, (*node, "handled"), cost=self.problem.handling[site], most=closed)
            if may_leave:
                self._arc((*node, "handled"), ("sent", site))
            for line in self._lines(site, origins):
                self._arc((*node, "handled"), ("line", line.reference))

    def _limit(self, site: str, flow: str) -> int | None:
        return self.problem.limits.get((site, flow))

    def _arrive(self, lane: OracleLane) -> Node:
        if self.problem.is_joined(lane.destination):
            return ("arrived", lane.destination)
        return ("arrived", lane.destination, lane.origin)

    def _leave(self, site: str) -> Node:
        return ("left", site) if (site, "sent") in self.problem.limits else ("sent", site)

    def _lines(self, site: str, origins: frozenset[str] | None) -> Iterable[OracleLine]:
        """Yield the lines of ``site`` that goods from ``origins`` (None: anywhere) may serve."""
        for line in self.problem.lines:
            if line.site != site:
                continue
            if origins is None or line.origins is None:
                assert line.origins is None or origins is not None
                yield line
            elif origins and origins <= line.origins:
                yield line
            else:
                assert not origins & line.origins, "partly allowed: refused at the door"
