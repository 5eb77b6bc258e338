"""Checks of rules against the network they rule: what they pick, and what they contradict."""

import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any, Final

import numpy as np

from service.network.assembly import Assembly
from service.network.columns import BoolArray, IntArray, Network
from service.network.days import is_dated
from service.network.faults import FaultList, pointer
from service.network.naming import lane_rows
from service.network.not_yet import SHARED, refusal
from service.network.quantities import exact_text
from service.network.reach import LaneUse
from service.network.row_checks import MEASURE_ADVICE, measure_grain, off_step_detail
from service.network.rule_reading import SentRule
from service.network.rules import (
    Closure,
    FixedQuantity,
    SharedCapacity,
    Throughput,
    in_force,
    items_selected,
    lanes_selected,
    sites_selected,
)
from service.network.sharing import UNITS_ADVICE, Sharing
from service.network.tariffs import tariffs_of
from service.network.units import per_unit


def check_rules(assembly: Assembly, use: LaneUse, sharing: Sharing, faults: FaultList) -> None:
    """Find rules that contradict the network or each other, and doubts about the others."""
    checks = _RuleChecks(assembly=assembly, use=use, sharing=sharing, faults=faults)
    cut_off = str(assembly.network.head["cut_off"])
    selectables = _Selectables(assembly.network) if assembly.rules else None
    for sent in assembly.rules:
        if selectables is not None:
            selectables.doubt(sent, faults)
        rule = sent.rule
        if not in_force(rule, cut_off):
            expired = rule.ends is not None and rule.ends < cut_off[:10]
            code, detail = _NOT_IN_FORCE[expired]
            faults.caution(code, detail, [(pointer("rules", sent.place), rule.id)])
        elif isinstance(rule, Closure):
            checks.closure(rule)
        elif isinstance(rule, FixedQuantity):
            checks.fixed_quantity(sent, rule)
        elif isinstance(rule, Throughput):
            checks.throughput(sent, rule)
        else:
            checks.shared_capacity(sent, rule)


@dataclass(slots=True)
class _RuleChecks:
    """The checks of rules in force; remembers which rule fixed a lane for an item first."""

    assembly: Assembly
    use: LaneUse
    sharing: Sharing
    faults: FaultList
    _fixed_by: dict[int, IntArray] = field(default_factory=dict)
    _fixing: list[FixedQuantity] = field(default_factory=list)
    _passing: dict[tuple[str, int], BoolArray] = field(default_factory=dict)

    def closure(self, rule: Closure) -> None:
        """Say which forced quantities a closure drops."""
        network, lanes = self.assembly.network, self.assembly.sent.lanes
        of_items = items_selected(network, rule)
        item = network.lanes.item
        # A lane for any item is closed for the picked items alone; its must-ship is for each item.
        concerned = np.where(item >= 0, np.append(of_items, False)[item], of_items.any())
        dropped = np.flatnonzero(
            lanes_selected(network, rule) & network.lanes.must_ship.present & concerned
        )
        sent_rows = self.assembly.lane_rows[dropped[:3]].tolist()
        self.faults.caution(
            "must_ship_closed",
            "The lane is closed by a rule, so its must_ship is dropped.",
            [
                (lanes.faults.place("must_ship", row), lanes.faults.value("must_ship", row))
                for row in sent_rows
            ],
            len(dropped),
        )

    def fixed_quantity(self, sent: SentRule, rule: FixedQuantity) -> None:
        """Find quantities off the step, and lanes that two rules fix differently."""
        network = self.assembly.network
        picked = lanes_selected(network, rule)
        place = pointer("rules", sent.place, "quantity")
        self._fixing.append(rule)
        for item in np.flatnonzero(items_selected(network, rule)).tolist():
            rows = self.use.rows(item)
            rows = rows[picked[rows]]
            if len(rows) == 0:
                continue
            self._check_steps(item, rows, rule.quantity, place)
            fixed_by = self._fixed_by.setdefault(item, np.full(len(picked), -1, dtype=np.int64))
            for former in np.unique(fixed_by[rows]).tolist():
                if former >= 0 and self._fixing[former].quantity != rule.quantity:
                    detail = (
                        f"Rule {self._fixing[former].id} fixes the same lane and item to another "
                        "quantity. Keep one of both."
                    )
                    self.faults.add(place, "rules_contradict", detail, rule.id)
            fixed_by[rows] = len(self._fixing) - 1

    def _check_steps(self, item: int, rows: IntArray, quantity: Fraction, place: str) -> None:
        """Find out whether a quantity is whole steps of an item in the measures of lanes."""
        network = self.assembly.network
        thing, measures = network.items[item], network.lanes.measure
        for code in np.unique(measures.codes[rows]).tolist():
            size = measure_grain(thing, measures.values[code])
            if size is not None and (quantity / size).denominator != 1:
                detail = off_step_detail(thing, size, measures.values[code])
                self.faults.add(place, "off_step", detail, exact_text(quantity))

    def throughput(self, sent: SentRule, rule: Throughput) -> None:
        """Find a limit that does not say for whom, or in what, it holds."""
        network = self.assembly.network
        sites = np.flatnonzero(sites_selected(network, rule)).tolist()
        self._say_for_whom(sent, len(sites), "sites")
        allowed = np.flatnonzero(items_selected(network, rule)).tolist()
        passing = [
            {item for item in allowed if self._can_pass(item, rule.flow)[site]} for site in sites
        ]
        if is_dated(network) or tariffs_of(network.head):
            by_ways = [
                (rule.flow != "sent" or self.use.passes_on[site])
                and any(self.use.apart(item)[site] for item in allowed)
                for site in sites
            ]
            together = rule.per == "together" and len(sites) > 1
            if together or any(by_ways) or any(len(items) > 1 for items in passing):
                self._refuse_on_days(sent)
                return
        self._share(sent, rule.measure, passing, together=rule.per == "together")

    def _refuse_on_days(self, sent: SentRule) -> None:
        """Refuse a limit that items share where goods move on several days, or by tariffs."""
        detail = refusal("a limit that items or lanes share, with dates or tariffs", SHARED)
        self.faults.add(pointer("rules", sent.place), "not_yet", detail, sent.rule.id)

    def shared_capacity(self, sent: SentRule, rule: SharedCapacity) -> None:
        """Find a limit that does not say for whom, or in what, it holds."""
        network = self.assembly.network
        if is_dated(network) or tariffs_of(network.head):
            self._refuse_on_days(sent)
            return
        picked = lanes_selected(network, rule)
        self._say_for_whom(sent, int(picked.sum()), "lanes")
        users = np.zeros(len(network.lanes), np.int64)
        on_lanes = []
        for item in np.flatnonzero(items_selected(network, rule)).tolist():
            rows = self.use.rows(item)
            rows = rows[picked[rows]]
            users[rows] += 1
            on_lanes.append((item, rows))
        together = rule.per == "together"
        using = {item for item, rows in on_lanes if len(rows)}
        sharing = {item for item, rows in on_lanes if (users[rows] > 1).any()}
        self._share(sent, rule.measure, [using if together else sharing], together=True)
        for item in using - sharing:
            self._share(sent, rule.measure, [{item}], together=False)

    def _say_for_whom(self, sent: SentRule, picked: int, what: str) -> None:
        """Find a limit on several things that does not say whether it is one for all of them."""
        if picked > 1 and not sent.per_said:
            detail = (
                f"The rule picks several {what}: say per: each (a limit for each of them) or "
                "per: together (one for all)."
            )
            self.faults.add(pointer("rules", sent.place, "per"), "per_missing", detail)

    def _share(
        self, sent: SentRule, measure: str, groups: list[set[int]], *, together: bool
    ) -> None:
        """Note which items share the limits of a rule, in a measure that all of them have.

        ``groups`` are the items at each limit; ``together``, all of them are at one.
        """
        network, place = self.assembly.network, ("rules", sent.place)
        using = set().union(*groups)
        for item in sorted(using):
            if not per_unit(network.items[item], measure):
                detail = f"{network.items[item].id} counts here. {MEASURE_ADVICE}"
                self.faults.add(pointer(*place, "measure"), "measure_unknown", detail, measure)
        for items in [using] if together else groups:
            self.sharing.among(items)
            units = {network.items[item].unit for item in items}
            if measure == "unit" and len(units) > 1:
                place_of = pointer(*place, "measure")
                self.faults.add(place_of, "units_differ", UNITS_ADVICE, sorted(units))
                return

    def _can_pass(self, item: int, flow: str) -> BoolArray:
        """Return, in shape (sites,), where an item can be received, sent, or pass through."""
        key = flow, item
        if key not in self._passing:
            if flow == "sent":
                sites = self.use.sent(item)
            elif flow == "received":
                sites = self.use.received(item)
            else:
                sites = self.use.received(item) | self.use.stock(item)
            self._passing[key] = sites
        return self._passing[key]


class _Selectables:
    """What the keys of selectors can name in a network."""

    def __init__(self, network: Network) -> None:
        """Collect the values once for all rules."""
        self._network = network
        lanes = network.lanes
        self._known: dict[tuple[str, str], set[str]] = {
            ("lanes", "origin"): {network.sites[at].id for at in np.unique(lanes.origin)},
            ("lanes", "destination"): {network.sites[at].id for at in np.unique(lanes.destination)},
            ("lanes", "carrier"): set(lanes.carrier.values),
            ("lanes", "tag"): {tag for text in lanes.tags.values for tag in json.loads(text)},
            ("sites", "ids"): {site.id for site in network.sites},
            ("sites", "role"): {role for site in network.sites for role in site.roles},
            ("sites", "tag"): {tag for site in network.sites for tag in site.tags},
            ("items", "ids"): {item.id for item in network.items},
            ("items", "tag"): {tag for item in network.items for tag in item.tags},
        }

    def missing(self, what: str, key: str, values: list[str]) -> list[str]:
        """Return the values that name nothing."""
        if (what, key) == ("lanes", "ids"):
            rows = lane_rows(self._network, values)
            return [value for value, row in zip(values, rows, strict=True) if row < 0]
        return [value for value in values if value not in self._known[what, key]]

    def doubt(self, sent: SentRule, faults: FaultList) -> None:
        """Say what in the selectors of a rule picks nothing in this network."""
        picked = {
            "lanes": lanes_selected(self._network, sent.rule),
            "sites": sites_selected(self._network, sent.rule),
            "items": items_selected(self._network, sent.rule),
        }
        for what, flags in picked.items():
            selector: Any = sent.document.get(what)
            if selector is None:
                continue
            place = ("rules", sent.place, what)
            nothing = [
                (pointer(*place, key), value)
                for key, values in selector.items()
                for value in self.missing(what, key, values)
            ]
            if not nothing and not flags.any():
                nothing = [(pointer(*place), sent.rule.id)]
            detail = "What the rule's selector names here is not in the network: it picks nothing."
            faults.caution("selector_picks_nothing", detail, nothing)


# By whether the rule's last day has passed.
_NOT_IN_FORCE: Final[Mapping[bool, tuple[str, str]]] = {
    True: ("rule_expired", "The rule ended (until) before the date of the cut-off: not applied."),
    False: ("rule_not_begun", "The rule begins (from) after the date of the cut-off: not applied."),
}
