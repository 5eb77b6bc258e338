"""How the freight of a consignment comes about, as stated and as it should be."""

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

from service.network.columns import Network
from service.proof.money import in_plan_money
from service.proof.shapes import amount
from service.proof.tariff_lanes import freights_of

_WORDS = frozenset({"tariff", "version", "source", "basis", "currency"})


def stated_bills(documents: Sequence[Mapping[str, Any]]) -> list[dict[str, object] | None]:
    """Return the bill of each consignment with its amounts as numbers, None where there is none."""
    return [_exact(entry["freight"]) if "freight" in entry else None for entry in documents]


def due_bills(
    network: Network, rows: Sequence[int], loads: Sequence[list[tuple[int, int]]]
) -> list[dict[str, object] | None]:
    """Return what the tariff of each lane asks for all that is on it: a load is (item, steps)."""
    freights = freights_of(network)
    if freights is None:
        return [None] * len(rows)
    bills: list[dict[str, object] | None] = []
    for row, load in zip(rows, loads, strict=True):
        tariff = freights.tariff(row)
        if tariff is None:
            bills.append(None)
            continue
        found, currency = freights.bill(row, load), tariff.get("currency")
        bills.append(
            {
                "tariff": tariff["id"],
                "version": tariff.get("version"),
                "source": tariff.get("source"),
                "basis": tariff["basis"],
                "measured": found.measured,
                "charged": found.charged,
                "rate": found.parts[-1][2] if found.parts else Fraction(0),
                "parts": [
                    {"from": start, "quantity": each, "rate": rate, "amount": each * rate}
                    for start, each, rate in found.parts
                ],
                "minimum_charge": Fraction(tariff.get("minimum_charge", "0")),
                "surcharge_percent": Fraction(tariff.get("surcharge_percent", "0")),
                "currency": currency or network.head["currency"],
                "amount": found.amount,
                "cost": found.amount * in_plan_money(network.head, currency),
            }
        )
    return bills


def _exact(bill: Mapping[str, Any]) -> dict[str, object]:
    """Return a bill as stated with its amounts as numbers."""
    exact: dict[str, object] = {
        name: text if name in _WORDS else amount(text)
        for name, text in bill.items()
        if name != "parts"
    }
    exact["parts"] = [{name: amount(text) for name, text in part.items()} for part in bill["parts"]]
    return exact
