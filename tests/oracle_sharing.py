"""A judge of items that share limits: one mixed-integer program of all items, solved by HiGHS.

The items are written by ``oracle_programs.py``, where goods are known by the site they were drawn
at; the limits are read from the definition itself. Every quantity is a whole number of steps.
"""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import lcm
from typing import Any

import numpy as np
from scipy.optimize import Bounds, LinearConstraint, milp
from scipy.sparse import csr_array

from tests.oracle_programs import UNLIMITED, WrittenProblem
from tests.oracle_reading import (
    Document,
    applies,
    exact,
    lane_selected,
    per_unit,
    read_items,
    site_selected,
)

# HiGHS keeps rows to a part in a million; ours are scaled to whole numbers far below that.
NEAR_WHOLE = 1e-4

Row = dict[int, Fraction]


@dataclass(frozen=True, slots=True, kw_only=True)
class Bounded:
    """``least`` <= the sum of ``row`` <= ``most``; None where there is no limit."""

    row: Row
    least: Fraction | None
    most: Fraction | None


class SharingJudge:
    """All items of a document in one program, with the limits that they share."""

    def __init__(self, document: Document, options: Mapping[str, Any]) -> None:
        """Write the whole program."""
        self.document = document
        self.options = options
        shortages = options.get("shortages", "allow") == "allow"
        self.problems = read_items(document, options)
        self.written = [WrittenProblem(one, shortages=shortages) for one in self.problems]
        sizes = [len(one.program.cost) for one in self.written]
        self.first = [sum(sizes[:at]) for at in range(len(sizes))]
        self.columns = sum(sizes)
        self.rows = [*self._own_rows(), *self._lane_limits(), *self._rule_limits()]

    # ------------------------------------------------------------------ what is asked of it

    def least_short(self, priority: int, caps: Mapping[int, Fraction]) -> Fraction | None:
        """Return the least shortage of a priority, in the measure of shortages; None: no plan."""
        return self._least(self._short(priority), caps)

    def least_cost(self, caps: Mapping[int, Fraction]) -> Fraction | None:
        """Return the least cost where shortages are at most ``caps``; None without a plan."""
        return self._least(
            {
                self.first[at] + column: Fraction(cost, one.scale)
                for at, one in enumerate(self.written)
                for column, cost in enumerate(one.program.cost)
                if cost
            },
            caps,
        )

    def priorities(self) -> list[int]:
        """Return the priorities that occur."""
        return sorted({priority for one in self.problems for priority in one.priorities()})

    def short_in_measure(self, item: str, quantity: Fraction) -> Fraction:
        """Return a shortage of an item in the measure in which shortages are added up."""
        return quantity * per_unit(self._item(item), self.document.get("shortage_measure"))

    # ------------------------------------------------------------------ how it is written

    def _item(self, name: str) -> Document:
        item: Document = next(row for row in self.document["items"] if row["id"] == name)
        return item

    def _per_step(self, at: int, measure: str | None) -> Fraction:
        return per_unit(self._item(self.problems[at].item), measure) * self.problems[at].step

    def _short(self, priority: int) -> Row:
        measure = self.document.get("shortage_measure")
        return {
            self.first[at] + column: self._per_step(at, measure)
            for at, one in enumerate(self.written)
            for column in one.short.get(priority, ())
        }

    def _own_rows(self) -> Iterable[Bounded]:
        for at, one in enumerate(self.written):
            for equal, rows in ((True, one.program.equal), (False, one.program.at_most)):
                for row, value in rows:
                    moved = {self.first[at] + c: Fraction(v) for c, v in row.items()}
                    most = Fraction(value)
                    yield Bounded(row=moved, least=most if equal else None, most=most)

    def _on_lanes(self, lanes: Iterable[int], items: Iterable[int], measure: str | None) -> Row:
        picked = set(lanes)
        return {
            self.first[at] + column: self._per_step(at, measure)
            for at in items
            for lane, moved in zip(self.problems[at].lanes, self.written[at].moved, strict=True)
            if lane.row in picked
            for column in moved.values()
        }

    def _lane_limits(self) -> Iterable[Bounded]:
        for number, lane in enumerate(self.document["lanes"]):
            if lane.get("per") != "together" or "item" in lane:
                continue
            items = range(len(self.problems))
            row = self._on_lanes([number], items, lane.get("measure"))
            least = exact(lane["must_ship"]) if "must_ship" in lane else None
            open_ = [
                one.most != 0
                for problem in self.problems
                for one in problem.lanes
                if one.row == number
            ]
            yield Bounded(
                row=row,
                least=least if any(open_) else None,
                most=exact(lane["capacity"]) if "capacity" in lane else None,
            )

    def _rule_limits(self) -> Iterable[Bounded]:
        for rule in self.document.get("rules", []):
            items = [
                at
                for at, one in enumerate(self.problems)
                if applies(self.document, rule, self._item(one.item))
            ]
            if rule["rule"] == "throughput":
                yield from self._throughput(rule, items)
            elif rule["rule"] == "shared_capacity":
                lanes = [
                    number
                    for number, lane in enumerate(self.document["lanes"])
                    if lane_selected(lane, rule["lanes"])
                ]
                each = rule.get("per", "each") == "each"
                for group in [[lane] for lane in lanes] if each else [lanes]:
                    yield self._at_most(rule, self._on_lanes(group, items, rule.get("measure")))

    def _throughput(self, rule: Document, items: Sequence[int]) -> Iterable[Bounded]:
        sites = [
            site["id"] for site in self.document["sites"] if site_selected(site, rule["sites"])
        ]
        end = "origin" if rule["flow"] == "sent" else "destination"
        each = rule.get("per", "each") == "each"
        for group in [[site] for site in sites] if each else [sites]:
            lanes = [n for n, lane in enumerate(self.document["lanes"]) if lane[end] in group]
            row = self._on_lanes(lanes, items, rule.get("measure"))
            if rule["flow"] == "through":
                row |= {
                    self.first[at] + column: self._per_step(at, rule.get("measure"))
                    for at in items
                    for site in group
                    for column in self.written[at].drawn[site]
                }
            yield self._at_most(rule, row)

    @staticmethod
    def _at_most(rule: Document, row: Row) -> Bounded:
        return Bounded(row=row, least=None, most=exact(rule["maximum"]))

    def _least(self, objective: Row, caps: Mapping[int, Fraction]) -> Fraction | None:
        """Return the least value of an objective; all its values are on one grid."""
        rows = [one for one in self.rows if one.row]
        rows += [
            Bounded(row=self._short(priority), least=None, most=most)
            for priority, most in caps.items()
            if self._short(priority)
        ]
        if any(not one.row and (one.least or 0) > 0 for one in self.rows):
            return None
        if not self.columns:
            return Fraction(0)
        below = lcm(1, *(value.denominator for value in objective.values()))
        cost = np.zeros(self.columns)
        for column, value in objective.items():
            cost[column] = float(value * below)
        upper = [top for one in self.written for top in one.program.upper]
        result = milp(
            cost,
            constraints=_constraints(rows, self.columns),
            integrality=[1] * self.columns,
            bounds=Bounds(0, [np.inf if top == UNLIMITED else top for top in upper]),
            options={"mip_rel_gap": 0},
        )
        if result.status == 2:
            return None
        assert result.status == 0, result.message
        assert abs(result.fun - round(result.fun)) < NEAR_WHOLE * max(1, abs(result.fun)) + 0.01
        return Fraction(round(result.fun), below)


def _constraints(rows: Sequence[Bounded], columns: int) -> list[LinearConstraint]:
    """Return rows in whole numbers, as HiGHS takes them."""
    if not rows:
        return []
    numbers, places, values, least, most = [], [], [], [], []
    for number, one in enumerate(rows):
        below = lcm(1, *(value.denominator for value in one.row.values()))
        for column, value in one.row.items():
            numbers.append(number)
            places.append(column)
            values.append(float(value * below))
        # Whole numbers on the left: what lies between two of them on the right is rounded in.
        least.append(-np.inf if one.least is None else float(-((-one.least * below) // 1)))
        most.append(np.inf if one.most is None else float((one.most * below) // 1))
    matrix = csr_array((values, (numbers, places)), shape=(len(rows), columns))
    return [LinearConstraint(matrix, least, most)]
