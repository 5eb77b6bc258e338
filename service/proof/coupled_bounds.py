"""Lower bounds of items that share limits, computed again from the prices of a certificate.

Whoever pays m for each grain that a plan takes of a limit, and gets back m times the limit, pays no
more for any plan that keeps it (with m above 0; below 0, for a limit that must be reached). What is
then left to minimise is a network for each item by itself: with prices at its nodes every arc has
a reduced cost, and no flow costs less than each arc at the better of its two limits.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from service.network.columns import Network
from service.network.units import per_unit
from service.proof.arcs import ItemArcs
from service.proof.costs import scaled_costs
from service.proof.exact import ROOM, Whole, joined, magnitude, plus, whole
from service.proof.flows import Names
from service.proof.results import ItemResult
from service.proof.shapes import amount
from service.proof.shared_limits import Family, SharedLimits
from service.proof.violations import Findings


@dataclass(frozen=True, slots=True, kw_only=True)
class Claim:
    """One step of a circle: what it is about, what was achieved, and from which grid."""

    priority: int | None
    achieved: Fraction
    grid: Fraction


class Circle:
    """Items that a certificate proves together, and what their steps achieved."""

    def __init__(
        self,
        network: Network,
        arcs: Sequence[ItemArcs],
        others: Sequence[ItemArcs],
        *,
        limits: SharedLimits,
        names: Names,
    ) -> None:
        """Prepare for items with their networks ``arcs``; ``others`` are those outside."""
        self._network, self._names, self._limits = network, names, limits
        self._arcs, self._others = arcs, others
        self.items = [network.items[each.item].id for each in arcs]
        measure = network.head.get("shortage_measure")
        self.measure = str(measure) if measure is not None and len(arcs) > 1 else "unit"
        self._amounts = [self._amount(each) for each in arcs]
        self.priorities: list[int] = []
        self._short: dict[int, Fraction] = {}
        self._cost = Fraction(0)

    def achieves(self, results: Sequence[ItemResult], *, shortages: bool) -> None:
        """Note what the flows of the items come to, in their order."""
        occurring = {priority for arcs in self._arcs for priority in arcs.priorities}
        self.priorities = sorted(occurring) if shortages else []
        self._short = {
            priority: sum(
                (
                    result.short_by_priority.get(priority, 0) * per
                    for result, per in zip(results, self._amounts, strict=True)
                ),
                Fraction(0),
            )
            for priority in self.priorities
        }
        self._cost = sum(
            (sum(result.money.values(), Fraction(0)) for result in results), Fraction(0)
        )

    def claims(self, scale: Fraction) -> list[Claim]:
        """Return the steps that the certificate must state, in their order."""
        grid = _common(self._amounts)
        return [
            *(
                Claim(priority=priority, achieved=self._short[priority], grid=grid)
                for priority in self.priorities
            ),
            Claim(priority=None, achieved=self._cost, grid=1 / scale),
        ]

    def bound(
        self, claim: Claim, proof: Mapping[str, Any] | None, findings: Findings, *, place: str
    ) -> Fraction | None:
        """Return the bound that a proof gives one step, None if it gives none.

        Without any proof no shortage is below 0. What is achieved is a multiple of the claim's
        grid, so that the bound is rounded up to one.
        """
        if proof is None:
            if claim.priority is None:
                findings.add("bound_wrong", "the cost has no proof", place=place)
                return None
            return Fraction(0)
        total = self._total(claim, proof, findings, place=place)
        if total is None:
            return None
        grains = total / claim.grid
        return -(-grains.numerator // grains.denominator) * claim.grid

    def contradicts(self, proof: Mapping[str, Any], findings: Findings, *, place: str) -> bool:
        """Return whether a proof shows that no flow of the items keeps all limits.

        Where nothing costs anything a bound above 0 does.
        """
        total = self._total(None, proof, findings, place=place)
        return total is not None and total > 0

    def _total(
        self, claim: Claim | None, proof: Mapping[str, Any], findings: Findings, *, place: str
    ) -> Fraction | None:
        """Return the bound of one step (None: of nothing), None if there is none."""
        scale = amount(proof["scale"])
        costs = None if scale <= 0 else self._objective(claim, scale)
        if costs is None:
            detail = "the scale is not above 0, or does not make a cost whole"
            findings.add("cost_scale_wrong", detail, place=place)
            return None
        worth = self._priced(claim, proof, costs, scale, findings, place=place)
        if worth is None:
            return None
        total = -worth
        for at, arcs in enumerate(self._arcs):
            price = self._prices(arcs, proof, findings, place=place)
            if price is None:
                return None
            least = least_sum(arcs, costs[at], price)
            if least is None:
                findings.add("not_optimal", f"no bound for {self.items[at]}", place=place)
                return None
            total += least
        return total / scale

    def _amount(self, arcs: ItemArcs) -> Fraction:
        """Return how much of the measure of shortages one step of an item is."""
        per = per_unit(self._network.items[arcs.item], self.measure)
        return Fraction(0) if per is None else per * arcs.step

    def _objective(self, claim: Claim | None, scale: Fraction) -> list[Whole] | None:
        """Return what a step of the order of aims counts on each arc, times ``scale``."""
        found: list[Whole] = []
        for arcs, per in zip(self._arcs, self._amounts, strict=True):
            if claim is None:
                found.append(np.zeros(len(arcs.rows) + len(arcs.arcs), dtype=np.int64))
                continue
            if claim.priority is None:
                costs = scaled_costs(self._network, arcs, scale)
                if costs is None:
                    return None
                found.append(joined([costs.lanes, costs.others]))
                continue
            number = per * scale
            if number.denominator != 1:
                return None
            found.append(self._shortage(arcs, claim.priority, number.numerator))
        return found

    def _shortage(self, arcs: ItemArcs, priority: int, number: int) -> Whole:
        """Return ``number`` on each arc of shortage of a priority, 0 on all others."""
        others = [
            number if arc.rank and arcs.priorities[arc.rank - 1] == priority else 0
            for arc in arcs.arcs
        ]
        return joined([np.zeros(len(arcs.rows), dtype=np.int64), whole(others)])

    def _priced(  # noqa: PLR0913 - one step of the argument, with all that it needs
        self,
        claim: Claim | None,
        proof: Mapping[str, Any],
        costs: list[Whole],
        scale: Fraction,
        findings: Findings,
        *,
        place: str,
    ) -> int | None:
        """Add the prices of limits and of former shortages to ``costs``; return their worth.

        None where a price is of no limit, or has the wrong sign.
        """
        entries = proof["multipliers"]
        found = self._limits.find(
            [(entry["rule"], entry["site"], entry["lane"]) for entry in entries]
        )
        worth = 0
        paid: dict[int, tuple[Family, Whole]] = {}
        seen: set[tuple[int, int]] = set()
        for entry, limit in zip(entries, found, strict=True):
            if limit is None or (id(limit[0]), limit[1]) in seen:
                findings.add("name_unknown", "a price of no limit, or a second one", place=place)
                return None
            family, key = limit
            seen.add((id(family), key))
            number = amount(entry["value"]) * family.grain * scale
            bound = family.most[key] if number > 0 else family.least[key]
            empty: Whole = np.zeros(len(family.things), dtype=object)
            prices = paid.setdefault(id(family), (family, empty))[1]
            if number.denominator != 1 or bound is None:
                findings.add("multiplier_wrong", "this price proves nothing", place=place)
                return None
            prices[key] = number.numerator
            worth += number.numerator * bound
        for family, prices in paid.values():
            if self._is_wider(family, prices):
                findings.add("multiplier_wrong", "others take of this limit, too", place=place)
                return None
            self._pay(family, prices, costs)
        return self._cap(claim, proof, costs, scale, findings, place=place, worth=worth)

    def _is_wider(self, family: Family, prices: Whole) -> bool:
        """Return whether items outside the circle can take of a limit that has a price."""
        for arcs in self._others:
            positions, keys, number = family.counted(arcs)
            if number and (arcs.capacities()[positions[prices[keys] != 0]] != 0).any():
                return True
        return False

    def _pay(self, family: Family, prices: Whole, costs: list[Whole]) -> None:
        """Add what limits cost to each arc that takes of them."""
        for at, arcs in enumerate(self._arcs):
            positions, keys, number = family.counted(arcs)
            used = np.flatnonzero(prices[keys] != 0)
            if not len(used):
                continue
            extra = prices[keys[used]] * number
            if magnitude(costs[at]) + magnitude(extra) < ROOM and costs[at].dtype != object:
                extra = extra.astype(np.int64)
            else:
                costs[at] = costs[at].astype(object)
            costs[at][positions[used]] += extra

    def _cap(  # noqa: PLR0913 - see _priced
        self,
        claim: Claim | None,
        proof: Mapping[str, Any],
        costs: list[Whole],
        scale: Fraction,
        findings: Findings,
        *,
        place: str,
        worth: int,
    ) -> int | None:
        """Add the prices of the shortages that former steps achieved, which are caps now."""
        total = Fraction(worth)
        seen: set[int] = set()
        for entry in proof["caps"]:
            priority, price = entry["priority"], amount(entry["value"])
            latest = None if claim is None else claim.priority
            former = priority in self.priorities and (latest is None or priority < latest)
            if not former or price < 0 or priority in seen:
                findings.add("multiplier_wrong", "this price proves nothing", place=place)
                return None
            seen.add(priority)
            total += price * scale * self._short[priority]
            for at, (arcs, per) in enumerate(zip(self._arcs, self._amounts, strict=True)):
                number = price * per * scale
                if number.denominator != 1:
                    findings.add("multiplier_wrong", "this price is not whole", place=place)
                    return None
                paid = self._shortage(arcs, priority, number.numerator)
                costs[at] = plus(costs[at], paid)
        if total.denominator != 1:
            findings.add("multiplier_wrong", "the worth of caps is not whole", place=place)
            return None
        return total.numerator

    def _prices(
        self, arcs: ItemArcs, proof: Mapping[str, Any], findings: Findings, *, place: str
    ) -> Whole | None:
        """Return the price of each node of an item; those that are not listed are 0."""
        listed = [
            entry for entry in proof["prices"] if entry["item"] == self._network.items[arcs.item].id
        ]
        values = [0] * len(arcs.nodes)
        seen = {0}
        for entry in (node for listing in listed for node in listing["nodes"]):
            site = self._names.sites.get(entry["site"], -1)
            node = arcs.place.get((site, entry["side"], entry["qualifier"]))
            if node is None or node in seen:
                findings.add("name_unknown", "a price of no node, or a second one", place=place)
                return None
            seen.add(node)
            values[node] = int(entry["price"])
        return whole(values)


def least_sum(arcs: ItemArcs, cost: Whole, price: Whole) -> int | None:
    """Return what every flow of an item costs at least, None where there is no such bound.

    Each arc is taken at the better of its limits, so that an unlimited one below 0 bounds nothing.
    """
    if magnitude(cost) + 2 * magnitude(price) >= ROOM:
        cost, price = cost.astype(object), price.astype(object)
    found = 0
    for first, part in arcs.parts():
        reduced = cost[first : first + len(part.tail)] + price[part.tail] - price[part.head]
        gaining = np.flatnonzero(reduced < 0)
        if bool((part.capacity[gaining] < 0).any()):
            return None
        forced = np.flatnonzero((reduced > 0) & (part.minimum > 0))
        for picked, limit in ((gaining, part.capacity), (forced, part.minimum)):
            found += sum(
                int(each) * int(steps)
                for each, steps in zip(
                    reduced[picked].tolist(), limit[picked].tolist(), strict=True
                )
            )
    return found


def _common(amounts: Sequence[Fraction]) -> Fraction:
    """Return the largest number of which all ``amounts`` are multiples, 1 if there is none."""
    found = Fraction(0)
    for each in amounts:
        while each:
            found, each = each, found % each  # noqa: PLW2901 - Euclid's steps
    return found or Fraction(1)
