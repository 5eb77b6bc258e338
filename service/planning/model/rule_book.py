"""The rules in force, each with what it picks, looked up once for the whole run."""

from dataclasses import dataclass
from typing import Any

from service.network.columns import BoolArray, Network
from service.network.rules import (
    Closure,
    FixedQuantity,
    Rule,
    Throughput,
    in_force,
    items_selected,
    lanes_selected,
    rules_of,
    sites_selected,
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Entry:
    """A rule in force: which lanes, sites and items it picks (masks over the network's own)."""

    rule: Rule
    lanes: BoolArray
    sites: BoolArray
    items: BoolArray


@dataclass(frozen=True, slots=True, kw_only=True)
class RuleBook:
    """All rules of a network; ``entries`` are those in force, in the order of their ids."""

    rules: tuple[Rule, ...]
    entries: tuple[Entry, ...]

    def closures(self, item: int) -> tuple[Entry, ...]:
        """Return the closures in force that are about ``item``."""
        return self._of(Closure, item)

    def fixed_quantities(self, item: int) -> tuple[Entry, ...]:
        """Return the fixed quantities in force that are about ``item``."""
        return self._of(FixedQuantity, item)

    def throughputs(self, item: int) -> tuple[Entry, ...]:
        """Return the throughput limits in force that are about ``item``."""
        return self._of(Throughput, item)

    def _of(self, kind: Any, item: int) -> tuple[Entry, ...]:  # noqa: ANN401 - a class of rules
        """Return the entries of one kind that are about ``item``."""
        return tuple(
            entry for entry in self.entries if isinstance(entry.rule, kind) and entry.items[item]
        )


def rule_book(network: Network) -> RuleBook:
    """Read the rules of ``network`` and find what those in force pick."""
    rules = rules_of(network)
    cut_off = str(network.head["cut_off"])
    return RuleBook(
        rules=rules,
        entries=tuple(
            Entry(
                rule=rule,
                lanes=lanes_selected(network, rule),
                sites=sites_selected(network, rule),
                items=items_selected(network, rule),
            )
            for rule in rules
            if in_force(rule, cut_off)
        ),
    )
