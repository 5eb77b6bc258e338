"""The best plan of one item on its days by naming every path: an oracle that knows no nodes.

Goods of one stock row go over movements, day by day, to one order line. Every such path is a
variable of a linear program; capacity, stock and demand are its rows. HiGHS (through SciPy) finds
the least shortage of each priority, then the least lateness, then the least cost, one after the
other, each kept while the next is sought. Nothing here is taken from the service.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import date, datetime
from fractions import Fraction
from typing import Any, NamedTuple

import numpy as np
from scipy.optimize import linprog

from tests.factories import Document

Row = Mapping[str, Any]
FIRST_DAY = "0001-01-01"


class Leg(NamedTuple):
    """A lane (its position) on a day, and the day on which it arrives."""

    lane: int
    departs: date
    arrives: date


class Way(NamedTuple):
    """Goods of a stock row over legs to an order line, where they arrive on a day."""

    stock: int
    legs: tuple[Leg, ...]
    line: int
    arrives: date


@dataclass(frozen=True, slots=True, kw_only=True)
class Best:
    """What the best plan achieves: shortage by priority, weighted lateness, and money."""

    short: Mapping[int, Fraction]
    late: Fraction
    cost: Fraction


class Paths:
    """All paths of a network whose cross-docks lead in no circle and hold no stock."""

    def __init__(self, document: Document) -> None:
        """Look up what every path needs."""
        self._document = document
        self._today = date.fromisoformat(document["cut_off"][:10])
        self._periods = {date.fromisoformat(day) for day in document.get("periods", ())}
        self._stores = {row["site"] for row in document.get("storage", ())}
        self._docks = {site["id"] for site in document["sites"] if "cross_dock" in site["roles"]}
        self._made = datetime.fromisoformat(document.get("planned_at") or document["cut_off"])

    def ways(self) -> Iterator[Way]:
        """Yield every path."""
        for stock, row in enumerate(self._document["supply"]):
            start = date.fromisoformat(row.get("available_from", FIRST_DAY))
            for line, wanted in enumerate(self._document["demand"]):
                earliest = date.fromisoformat(wanted.get("earliest", FIRST_DAY))
                first = max(self._today, start, earliest)
                if wanted["site"] == row["site"] and in_window(wanted, first):
                    yield Way(stock, (), line, first)
            for leg in self._from_stock(row["site"], start):
                yield from self._onward((leg,), stock)

    def _onward(self, legs: tuple[Leg, ...], stock: int) -> Iterator[Way]:
        """Yield the paths that begin with some legs."""
        here = self._document["lanes"][legs[-1].lane]["destination"]
        day = legs[-1].arrives
        for line, wanted in enumerate(self._document["demand"]):
            if wanted["site"] == here and in_window(wanted, day):
                yield Way(stock, legs, line, day)
        if here in self._docks:
            for number, lane in self._open_lanes(here):
                for departs in self._onward_days(here, day, lane):
                    yield from self._onward((*legs, self._leg(number, departs)), stock)

    def _from_stock(self, site: str, start: date) -> Iterator[Leg]:
        """Yield the legs that stock of a site can begin with: it waits for whatever leaves."""
        for number, lane in self._open_lanes(site):
            days = self._periods or {self._today}
            if "departs" in lane:
                days = {date.fromisoformat(lane["departs"][:10])}
            for day in sorted(days):
                if day >= start and ("departs" in lane or day >= self._today):
                    yield self._leg(number, day)

    def _onward_days(self, dock: str, day: date, lane: Row) -> list[date]:
        """Return when goods that reach a cross-dock on a day may leave it over a lane.

        Without storage on that day alone; with it (there must be periods then) on any later one.
        """
        days = {day} if not self._periods else {d for d in self._periods if d >= self._today}
        if "departs" in lane:
            days = {date.fromisoformat(lane["departs"][:10])}
        return sorted(d for d in days if d == day or (d > day and dock in self._stores))

    def _open_lanes(self, site: str) -> Iterator[tuple[int, Row]]:
        """Yield the lanes from a site, without departures that closed before the plan is made."""
        for number, lane in enumerate(self._document["lanes"]):
            last = lane.get("closes", lane.get("departs"))
            is_open = last is None or datetime.fromisoformat(last) >= self._made
            if lane["origin"] == site and is_open:
                yield number, lane

    def _leg(self, number: int, departs: date) -> Leg:
        """Return a lane on a day."""
        lane = self._document["lanes"][number]
        arrives = date.fromordinal(departs.toordinal() + int(lane.get("transit_days", 0)))
        if "arrives" in lane:
            arrives = date.fromisoformat(lane["arrives"][:10])
        return Leg(number, departs, arrives)


def in_window(wanted: Row, day: date) -> bool:
    """Return whether an order line may be served on a day."""
    text = day.isoformat()
    return bool(wanted.get("earliest", text) <= text <= wanted.get("latest", text))


def days_late(wanted: Row, day: date) -> int:
    """Return how many days after its wish an order line is served."""
    return max(0, (day - date.fromisoformat(wanted.get("due", day.isoformat()))).days)


def best_of(document: Document) -> Best:
    """Return what the best plan achieves, exactly: all quantities and costs are whole numbers."""
    lines, ways = document["demand"], list(Paths(document).ways())
    nothing = [0.0] * len(lines)
    # Columns: what goes each way, then what each line is short of.
    limits = [
        ([float(way.stock == at) for way in ways] + nothing, float(row["quantity"]))
        for at, row in enumerate(document["supply"])
    ]
    limits += [
        ([float(leg in way.legs) for way in ways] + nothing, float(most))
        for leg in sorted({leg for way in ways for leg in way.legs})
        if (most := document["lanes"][leg.lane].get("capacity")) is not None
    ]
    equal = np.array(
        [
            [float(way.line == at) for way in ways]
            + [float(line == at) for line in range(len(lines))]
            for at in range(len(lines))
        ]
    )
    ranked = [line.get("priority", 5) if "shortage_cost" not in line else 0 for line in lines]
    priorities = sorted(set(ranked) - {0})
    aims = [
        [0.0] * len(ways) + [float(rank == priority) for rank in ranked] for priority in priorities
    ]
    aims.append([float(_lateness(document, way)) for way in ways] + nothing)
    short = [float(line.get("shortage_cost", 0)) for line in lines]
    aims.append([float(_cost(document, way)) for way in ways] + short)
    found: list[Fraction] = []
    for aim in aims:
        answer = linprog(
            aim,
            A_ub=np.array([row for row, _ in limits]),
            b_ub=[most for _, most in limits],
            A_eq=equal,
            b_eq=[float(line["quantity"]) for line in lines],
            method="highs",
        )
        assert answer.fun is not None, answer.message
        value = round(answer.fun)
        # The optimum of a network in whole numbers is whole; the program is in floating point.
        assert abs(answer.fun - value) < 1e-3, answer.fun
        found.append(Fraction(value))
        limits.append((aim, float(value)))
    return Best(short=dict(zip(priorities, found, strict=False)), late=found[-2], cost=found[-1])


def _lateness(document: Document, way: Way) -> int:
    """Return what lateness of a step on a way weighs."""
    wanted = document["demand"][way.line]
    if "late_cost_per_day" in wanted:
        return 0
    late = days_late(wanted, way.arrives)
    return late if "shortage_cost" in wanted else late * (10 - int(wanted.get("priority", 5)))


def _cost(document: Document, way: Way) -> int:
    """Return what a unit on a way costs, lateness in money included."""
    handling = {site["id"]: int(site.get("handling_cost", 0)) for site in document["sites"]}
    stock, wanted = document["supply"][way.stock], document["demand"][way.line]
    cost = int(stock.get("unit_cost", 0)) + handling[stock["site"]]
    for leg in way.legs:
        lane = document["lanes"][leg.lane]
        cost += int(lane["unit_cost"]) + handling[lane["destination"]]
    return cost + days_late(wanted, way.arrives) * int(wanted.get("late_cost_per_day", 0))


def achieved_on_days(steps: Sequence[Row], total_cost: str) -> Best:
    """Return what the steps of a certificate say, in the same form."""
    return Best(
        short={
            step["priority"]: Fraction(step["achieved"])
            for step in steps
            if step["of"] == "shortage"
        },
        late=sum(
            (Fraction(step["achieved"]) for step in steps if step["of"] == "lateness"), Fraction(0)
        ),
        cost=Fraction(total_cost),
    )
