"""The first judge: linear programs, one priority after the other, solved by HiGHS.

Every good is known by the site where it was drawn, so that the origins which an order line allows
mean what they say; nothing here knows of node splitting, weights for priorities or node prices.
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from random import Random

from scipy.optimize import OptimizeResult, linprog
from scipy.sparse import csr_array

from tests.oracle_problem import ItemAnswer, ItemProblem, OracleLine

# All optima are whole numbers here; HiGHS is trusted to come this near to one, or it is refused.
NEAR_WHOLE = 1e-3
UNLIMITED = float("inf")


@dataclass(slots=True)
class Program:
    """A linear program that grows column by column and row by row."""

    cost: list[int] = field(default_factory=list)
    upper: list[float] = field(default_factory=list)
    equal: list[tuple[dict[int, int], float]] = field(default_factory=list)
    at_most: list[tuple[dict[int, int], float]] = field(default_factory=list)

    def column(self, cost: Fraction | int = 0, *, upper: float = UNLIMITED) -> int:
        """Add a variable from 0 to ``upper`` and return its position."""
        assert Fraction(cost).denominator == 1, "costs are scaled to whole numbers first"
        self.cost.append(int(cost))
        self.upper.append(upper)
        return len(self.cost) - 1

    def balance(self, plus: Iterable[int], minus: Iterable[int], *, value: float = 0) -> None:
        """Add sum(plus) - sum(minus) = value."""
        self.equal.append((_row(plus, minus), value))

    def limit(self, columns: Iterable[int], *, most: float) -> None:
        """Add sum(columns) <= most."""
        self.at_most.append((_row(columns, ()), most))

    def force(self, columns: Iterable[int], *, least: float) -> None:
        """Add sum(columns) >= least."""
        self.at_most.append((_row((), columns), -least))

    def limit_cost(self, most: int) -> None:
        """Let no point cost more than ``most``."""
        self.at_most.append((dict(enumerate(self.cost)), most))

    def optimum(self, cost: Sequence[float]) -> float | None:
        """Return the least value of ``cost``, or None where nothing fits all rows.

        It is minus infinity where goods may circle for nothing, the more the better.
        """
        if not self.cost:
            # linprog refuses a program without variables; zero is then the only point.
            fits = all(value == 0 for _, value in self.equal)
            return 0.0 if fits and all(most >= 0 for _, most in self.at_most) else None
        result: OptimizeResult = linprog(  # type: ignore[call-overload]  # stubs lack sparse
            cost,
            A_eq=self._matrix(self.equal),
            b_eq=[value for _, value in self.equal] or None,
            A_ub=self._matrix(self.at_most),
            b_ub=[value for _, value in self.at_most] or None,
            bounds=[(0, None if upper == UNLIMITED else upper) for upper in self.upper],
            method="highs",
        )
        if result.status == 2:
            return None
        if result.status == 3:
            return -UNLIMITED
        assert result.status == 0, result.message
        return float(result.fun)

    def whole_optimum(self, cost: Sequence[float]) -> int | None:
        """Return the least value of ``cost`` where it is known to be a whole number."""
        value = self.optimum(cost)
        if value is None:
            return None
        assert abs(value - round(value)) < NEAR_WHOLE, f"HiGHS found {value}, no whole number"
        return round(value)

    def _matrix(self, rows: list[tuple[dict[int, int], float]]) -> csr_array | None:
        if not rows:
            return None
        numbers = [number for number, (row, _) in enumerate(rows) for _ in row]
        columns = [column for row, _ in rows for column in row]
        values = [float(value) for row, _ in rows for value in row.values()]
        return csr_array((values, (numbers, columns)), shape=(len(rows), len(self.cost)))


def _row(plus: Iterable[int], minus: Iterable[int]) -> dict[int, int]:
    row: dict[int, int] = {}
    for sign, columns in ((1, plus), (-1, minus)):
        for column in columns:
            row[column] = row.get(column, 0) + sign
    return row


def solve_programs(problem: ItemProblem, *, shortages: bool) -> ItemAnswer | None:
    """Return the best answer, priority by priority and then in money, or None without a plan."""
    return _solve(problem, WrittenProblem(problem, shortages=shortages))


def has_one_best_plan(problem: ItemProblem, *, shortages: bool) -> bool:
    """Return whether there is a best plan and all best plans ship the same on every lane.

    Best plans form a polytope, and what they ship on the lanes has whole corners. Where random
    whole weights have the same least and greatest value on it, it is one point but for a chance of
    one in ten thousand, so that two directions leave one in a hundred million.
    """
    written = WrittenProblem(problem, shortages=shortages)
    answer = _solve(problem, written)
    if answer is None:
        return False
    written.program.limit_cost(int(answer.cost * written.scale))
    random = Random(problem.item)  # noqa: S311 - a direction, no secret; the same for one item
    return all(_is_flat(written, random) for _ in range(2))


def _solve(problem: ItemProblem, written: "WrittenProblem") -> ItemAnswer | None:
    """Return the best answer, leaving the program with every priority capped at its best."""
    program = written.program
    achieved: dict[int, Fraction] = {}
    for priority in problem.priorities():
        columns = written.short[priority]
        short = program.whole_optimum(_indicator(columns, len(program.cost)))
        if short is None:
            return None
        program.limit(columns, most=short)
        achieved[priority] = short * problem.step
    cost = program.whole_optimum(program.cost)
    if cost is None:
        return None
    return ItemAnswer(item=problem.item, shortages=achieved, cost=Fraction(cost, written.scale))


def _indicator(columns: Iterable[int], length: int) -> list[int]:
    chosen = set(columns)
    return [1 if column in chosen else 0 for column in range(length)]


class WrittenProblem:
    """One item as a linear program: balance of every site for every good, and all limits."""

    def __init__(self, problem: ItemProblem, *, shortages: bool) -> None:
        """Write the whole program at once."""
        self.problem = problem
        self.program = Program()
        self.scale = problem.scale()
        # Goods without an origin can only circle, which a must-ship around a loop may force.
        self.goods: list[str | None] = [*sorted({stock.site for stock in problem.stocks}), None]
        self.moved = [
            {good: self.program.column(lane.cost * self.scale) for good in self.goods}
            for lane in problem.lanes
        ]
        self.drawn: dict[str, list[int]] = {site: [] for site in problem.sites}
        self.served: dict[str, list[int]] = {line.reference: [] for line in problem.lines}
        self.short: dict[int, list[int]] = {priority: [] for priority in problem.priorities()}
        self._limit_lanes()
        self._write_stock(shortages=shortages)
        for site in problem.sites:
            self._write_site(site)
        self._write_demand(shortages=shortages)

    def _limit_lanes(self) -> None:
        for lane, columns in zip(self.problem.lanes, self.moved, strict=True):
            self.program.force(columns.values(), least=lane.least)
            if lane.most is not None:
                self.program.limit(columns.values(), most=lane.most)

    def _write_stock(self, *, shortages: bool) -> None:
        """Stock is drawn at its cost or kept for nothing; what is kept is wanted by priority."""
        kept: dict[str, list[int]] = {keep.site: [] for keep in self.problem.kept}
        for stock in self.problem.stocks:
            draw = self.program.column(stock.cost * self.scale)
            self.drawn[stock.site].append(draw)
            taken = [draw]
            if stock.site in kept:
                kept[stock.site].append(self.program.column())
                taken.append(kept[stock.site][-1])
            self.program.limit(taken, most=stock.steps)
        for keep in self.problem.kept:
            filled = list(kept[keep.site])
            if shortages and keep.steps:
                filled.append(self.program.column())
                self.short[keep.priority].append(filled[-1])
            self.program.balance(filled, (), value=keep.steps)

    def _write_site(self, site: str) -> None:
        """Goods that arrive serve the site, and go on only at a cross-dock; drawn ones do both."""
        lanes = list(zip(self.problem.lanes, self.moved, strict=True))
        arriving = [columns for lane, columns in lanes if lane.destination == site]
        leaving = [columns for lane, columns in lanes if lane.origin == site]
        passing: list[int] = []
        for good in self.goods:
            through = [self._serve(line, good) for line in self._lines(site, good)]
            onward = [self._pass(site)] if site in self.problem.cross_docks else []
            self.program.balance([c[good] for c in arriving], [*through, *onward])
            passing += [*through, *onward]
            if good == site:
                served = [self._serve(line, good) for line in self._lines(site, good)]
                sent = self._pass(site)
                self.program.balance(self.drawn[site], [*served, sent])
                passing += [*served, sent]
                onward.append(sent)
            self.program.balance(onward, [c[good] for c in leaving])
        for flow, columns in (
            ("received", [column for by_good in arriving for column in by_good.values()]),
            ("sent", [column for by_good in leaving for column in by_good.values()]),
            ("through", passing),
        ):
            if (site, flow) in self.problem.limits:
                self.program.limit(columns, most=self.problem.limits[site, flow])

    def _lines(self, site: str, good: str | None) -> list[OracleLine]:
        """Return the order lines of ``site`` that a good drawn at ``good`` may serve."""
        return [
            line
            for line in self.problem.lines
            if line.site == site
            and good is not None
            and (line.origins is None or good in line.origins)
        ]

    def _serve(self, line: OracleLine, good: str | None) -> int:
        assert good is not None, "circling goods serve nobody"
        self.served[line.reference].append(self._pass(line.site))
        return self.served[line.reference][-1]

    def _pass(self, site: str) -> int:
        """Add one way through ``site``, at its handling cost; nothing passes a closed site."""
        upper = 0 if site in self.problem.closed else UNLIMITED
        return self.program.column(self.problem.handling[site] * self.scale, upper=upper)

    def _write_demand(self, *, shortages: bool) -> None:
        for line in self.problem.lines:
            filled = list(self.served[line.reference])
            if shortages and line.steps:
                filled.append(self.program.column((line.money or 0) * self.scale))
                if line.priority is not None:
                    self.short[line.priority].append(filled[-1])
            self.program.balance(filled, (), value=line.steps)


def _is_flat(written: WrittenProblem, random: Random) -> bool:
    weights = [0.0] * len(written.program.cost)
    for columns in written.moved:
        weight = float(random.randrange(1, 10_000))
        for column in columns.values():
            weights[column] = weight
    least = written.program.optimum(weights)
    negative_greatest = written.program.optimum([-weight for weight in weights])
    assert least is not None, "the best plan itself fits"
    assert negative_greatest is not None, "the best plan itself fits"
    # Of an endless face the greatest is infinite, and so is the difference.
    return abs(-negative_greatest - least) < 0.5
