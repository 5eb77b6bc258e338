"""One item of a network as the oracles see it: whole steps, exact money, plain Python."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from math import lcm


@dataclass(frozen=True, slots=True, kw_only=True)
class OracleLane:
    """A lane as one item sees it: money per step, least and most in steps (None: unlimited)."""

    row: int
    origin: str
    destination: str
    cost: Fraction
    least: int
    most: int | None


@dataclass(frozen=True, slots=True, kw_only=True)
class OracleStock:
    """Stock of one site at one cost: money per step and whole steps."""

    site: str
    cost: Fraction
    steps: int


@dataclass(frozen=True, slots=True, kw_only=True)
class OracleLine:
    """An order line: either ``priority`` or ``money`` per step that is short, never both."""

    reference: str
    site: str
    steps: int
    priority: int | None
    money: Fraction | None
    origins: frozenset[str] | None


@dataclass(frozen=True, slots=True, kw_only=True)
class OracleKept:
    """Stock that is to stay at a site, in steps, with the priority of what is missing of it."""

    site: str
    steps: int
    priority: int


@dataclass(frozen=True, slots=True, kw_only=True)
class ItemProblem:
    """All that concerns one item.

    ``stocked`` are the sites with a supply row above 0; ``limits`` is by (site, flow), in steps.
    """

    item: str
    step: Fraction
    sites: tuple[str, ...]
    cross_docks: frozenset[str]
    closed: frozenset[str]
    stocked: frozenset[str]
    handling: Mapping[str, Fraction]
    lanes: tuple[OracleLane, ...]
    stocks: tuple[OracleStock, ...]
    lines: tuple[OracleLine, ...]
    kept: tuple[OracleKept, ...]
    limits: Mapping[tuple[str, str], int] = field(default_factory=dict)

    def scale(self) -> int:
        """Return a whole factor that makes the money of every step a whole number."""
        money = [
            *(lane.cost for lane in self.lanes),
            *(stock.cost for stock in self.stocks),
            *self.handling.values(),
            *(line.money for line in self.lines if line.money is not None),
        ]
        return lcm(1, *(amount.denominator for amount in money))

    def is_joined(self, site: str) -> bool:
        """Return whether goods that arrive at ``site`` and goods drawn there are free alike."""
        if any(line.site == site and line.origins is not None for line in self.lines):
            return False
        fed = any(lane.destination == site for lane in self.lanes)
        leaves = any(lane.origin == site for lane in self.lanes)
        drawn = any(stock.site == site for stock in self.stocks)
        # Elsewhere than at a cross-dock what arrives must not leave, nor be taken for own stock.
        return site in self.cross_docks or not fed or not (drawn or leaves)

    def stock_behind(self, lane: OracleLane) -> frozenset[str]:
        """Return the sites whose stock of the item can leave on ``lane``, whatever is closed."""
        behind, todo, seen = set(), [lane.origin], set()
        while todo:
            site = todo.pop()
            if site in seen:
                continue
            seen.add(site)
            if site in self.stocked:
                behind.add(site)
            if site in self.cross_docks:
                # What a place that is no cross-dock receives does not leave it.
                todo += [other.origin for other in self.lanes if other.destination == site]
        return frozenset(behind)

    def priorities(self) -> list[int]:
        """Return the priorities that occur, first served first."""
        named = [line.priority for line in self.lines if line.steps]
        kept = [keep.priority for keep in self.kept if keep.steps]
        return sorted({priority for priority in [*named, *kept] if priority is not None})


@dataclass(frozen=True, slots=True, kw_only=True)
class ItemAnswer:
    """What one item costs at least, in money, and is short by priority, in item units."""

    item: str
    shortages: Mapping[int, Fraction]
    cost: Fraction
