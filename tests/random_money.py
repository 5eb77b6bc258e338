"""Random networks stated in several currencies and with charges, beside what they come to in one.

Each draw returns two definitions that mean the same money: one with currencies, exchange rates and
charges, and one in which a test has worked all of that into the unit costs.
"""

import copy
from fractions import Fraction
from random import Random
from typing import Any

from tests.factories import Document
from tests.random_witness import plain_text

# What one unit is in the currency of the plan: as a rate, for 100, and as its inverse.
RATES: tuple[dict[str, str], ...] = (
    {"currency": "NOK", "rate": "0.08", "as_of": "2026-02-02", "source": "central bank"},
    {"currency": "JPY", "rate": "0.5", "per": "100"},
    {"currency": "PLN", "rate": "1", "per": "4", "source": "treasury"},
)
VALUE = "12.5"
BASES = {None: "unit", "unit": "unit", "weight_kg": "weight", "volume_m3": "volume"}


def of_one(rate: dict[str, str]) -> Fraction:
    """Return what one unit of a currency is in that of the plan."""
    return Fraction(rate["rate"]) / Fraction(rate.get("per", "1"))


def in_other_money(document: Document, rng: Random) -> tuple[Document, Document]:
    """Return ``document`` with currencies and charges, and the same worked into its unit costs."""
    stated, plain = copy.deepcopy(document), copy.deepcopy(document)
    stated["exchange_rates"] = rng.sample(RATES, len(RATES))
    for item in stated["items"]:
        item["value"] = VALUE
    for table in ("supply", "lanes"):
        for row in stated[table]:
            if "unit_cost" in row and rng.random() < 0.5:
                _convert(row, rng.choice(RATES))
            elif rng.random() < 0.2:
                row["currency"] = document["currency"]
    for row, own in zip(stated["lanes"], plain["lanes"], strict=True):
        if rng.random() < 0.5:
            _charge(row, own, document["items"], rng)
    return stated, plain


def _convert(row: dict[str, Any], rate: dict[str, str]) -> None:
    """State the unit cost of a row in another currency, where it has a text of few decimals."""
    text = plain_text(Fraction(row["unit_cost"]) / of_one(rate), decimals=6)
    if text is not None:
        row |= {"unit_cost": text, "currency": rate["currency"]}


def _charge(
    row: dict[str, Any], plain: dict[str, Any], items: list[dict[str, Any]], rng: Random
) -> None:
    """Charge a lane, and make its plain cost as much higher."""
    measure = row.get("measure")
    rate, amount = rng.choice([None, *RATES]), Fraction(rng.randint(0, 900), 100)
    text = plain_text(amount, decimals=6)
    charges: list[dict[str, Any]] = [
        {"name": "duty", "basis": BASES.get(measure, measure), "rate": text}
    ]
    if rate is not None:
        charges[0]["currency"] = rate["currency"]
        amount *= of_one(rate)
    if measure in {None, "unit"} and rng.random() < 0.5:
        charges.append({"name": "cover", "basis": "value", "percent": "0.4"})
        amount += Fraction(VALUE) * Fraction("0.004")
    if "item" in row and rng.random() < 0.3:
        charges[0]["items"] = [row["item"]]
    elif "item" not in row and rng.random() < 0.3:
        charges[0]["items"] = [item["id"] for item in items]
    rng.shuffle(charges)
    row["charges"] = charges
    cost = plain_text(Fraction(plain["unit_cost"]) + amount, decimals=6)
    assert cost is not None, "amounts and rates have few decimals"
    plain["unit_cost"] = cost
