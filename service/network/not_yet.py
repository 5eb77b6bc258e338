"""What the interface promises but this version does not build: refused by name, never ignored.

Each entry names the subject that will bring it. A test walks the fields, rules and
options that were promised: each is read or refused, so that nothing falls between the two.
"""

from collections.abc import Mapping
from typing import Final

DATES = "dates and departures"
SHARED = "limits that several items share"
WHOLE = "choices in whole numbers"
COMMITTED = "committed order lines"
STABILITY = "planning close to a former run"
FAIRNESS = "fair shares"
EMISSIONS = "emissions"

NOT_YET_FIELDS: Final[Mapping[str, Mapping[str, str]]] = {
    "network": {
        "committed": COMMITTED,
        "committed_deducted": COMMITTED,
    },
    "items": {"divisible": SHARED},
    "sites": {},
    "supply": {},
    "demand": {
        "partial": WHOLE,
        "split": WHOLE,
    },
    "lanes": {
        "distance_km": EMISSIONS,
    },
    "rules": {"over": DATES},
}

NOT_YET_RULES: Final[Mapping[str, str]] = {
    "transit_limit": DATES,
    "commitment": SHARED,
    "source_share": SHARED,
    "cost_limit": SHARED,
    "emissions": EMISSIONS,
    "single_source": WHOLE,
    "complete_or_none": WHOLE,
    "minimum_or_none": WHOLE,
    "fixed_charge": WHOLE,
    "vehicles": WHOLE,
    "shipping_multiple": WHOLE,
}

NOT_YET_OPTIONS: Final[Mapping[str, str]] = {
    "fair_shares": FAIRNESS,
    "former_run": STABILITY,
    "allowance": STABILITY,
    "gap": WHOLE,
}


def refusal(name: str, subject: str) -> str:
    """Return the sentence that refuses ``name``, which belongs to ``subject``."""
    return f"'{name}' is not built yet (it comes with {subject}). Leave it out for now."
