"""What a check can find wrong, by stable code, and a place to collect it in.

The stand-alone verifier knows the same codes; a test compares the two lists.
"""

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final, Self

CODES: Final[Mapping[str, str]] = {
    # The file.
    "zip_unreadable": "the file is not a zip of the form that evidence has",
    "manifest_malformed": "the manifest is missing, not canonical JSON or of another format",
    "entry_missing": "an entry of the manifest is not in the file",
    "entry_unknown": "an entry of the file is not in the manifest",
    "entry_changed": "an entry does not have the digest that the manifest names",
    # The shape of what is in it.
    "network_malformed": "the network is not in normal form",
    "options_malformed": "the options are not those of a run",
    "plan_malformed": "the plan is not JSON of the shape that its format has",
    "certificate_malformed": "the certificate is not JSON of the shape that its format has",
    "history_malformed": "the history is not JSON of the shape that its format has",
    # The history.
    "event_hash": "an event does not have the hash of what it says",
    "event_chain": "an event does not follow the one before it",
    "event_payload": "the payload of an event does not have its digest",
    # What belongs together.
    "digest_mismatch": "plan, certificate, network and options do not belong together",
    "plan_head": "the plan does not say of whom and when the network is",
    "network_unusable": "the network cannot be planned as it is",
    "name_unknown": "something is named that is not in the network",
    "listed_twice": "something is listed twice",
    "quantity_wrong": "a quantity is not a whole number of steps above 0",
    # The decision.
    "limit_broken": "a flow is above its limit or below its minimum",
    "not_conserved": "what comes in is not what goes out",
    "cost_scale_wrong": "the cost scale does not make every cost a whole number",
    "weights_too_small": "the weights of shortage cannot prove the order of priorities",
    "price_missing": "a node has no price",
    "not_optimal": "flow and prices contradict that the plan is of least cost",
    "multiplier_wrong": "a price of a limit that items share proves nothing",
    "bound_wrong": "a step or a bound of the certificate is not what follows from it",
    "cut_wrong": "a cut does not prove that there is no plan",
    # The documents.
    "plan_line_wrong": "a plan line does not follow from network and order lines",
    "total_wrong": "a total, a part of it or its rounding is wrong",
    "order_line_wrong": "an order line does not say what was ordered, or does not add up",
    "route_wrong": "a source of an order line does not lead from its origin to its site",
    "lot_wrong": "the lots drawn are not those at the head of the stock",
    "lane_use_wrong": "order lines and plan lines use a lane differently",
    "shortage_wrong": "the table of shortages is not that of order lines and kept stock",
    "consignment_wrong": "a consignment is not what is on its lane",
    "site_use_wrong": "the use of a site's stock is wrong",
    "rules_wrong": "the rules listed are not those of the network",
}

# Enough to see a pattern; a broken million-line plan must not fill the memory with sentences.
EXAMPLES_MAX = 20


@dataclass(frozen=True, slots=True, kw_only=True)
class Violation:
    """One thing that is wrong: a code of ``CODES``, a sentence, and where it is."""

    code: str
    detail: str
    place: str


class Findings:
    """Collects violations, at most ``EXAMPLES_MAX`` of one code."""

    def __init__(self) -> None:
        """Start with nothing found."""
        self._found: list[Violation] = []
        self._counts: Counter[str] = Counter()

    def add(self, code: str, detail: str, *, place: str = "") -> None:
        """Note one violation."""
        if code not in CODES:
            raise KeyError(code)
        self._counts[code] += 1
        if self._counts[code] <= EXAMPLES_MAX:
            self._found.append(Violation(code=code, detail=detail, place=place))

    def take(self, others: Self) -> None:
        """Add what was found elsewhere."""
        self._found += others._found
        self._counts += others._counts

    def __bool__(self) -> bool:
        """Return whether anything was found."""
        return bool(self._found)

    def violations(self) -> tuple[Violation, ...]:
        """Return what was found, in the order in which it was."""
        return tuple(self._found)
