"""Exchange rates, currencies and charges at the door: what is kept, and what is refused."""

import copy
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from service.network.canonical import read_network
from tests.network_samples import check, digest, found, found_after, sound

Change = Callable[[dict[str, Any]], None]
RATE: dict[str, Any] = {"currency": "NOK", "rate": "0.0873", "as_of": "2026-02-02"}
DUTY: dict[str, Any] = {"name": "duty", "basis": "weight", "rate": "0.05"}


def with_rates(*rates: object) -> Change:
    """Return a change that states exchange rates."""
    return lambda document: document.update(exchange_rates=list(rates))


def with_charges(*charges: object) -> Change:
    """Return a change that charges the first lane."""
    return lambda document: document["lanes"][0].update(charges=list(charges))


def in_currency(table: str, code: object) -> Change:
    """Return a change that states the first row of a table in a currency."""
    return lambda document: document[table][0].update(currency=code)


RATES = "/exchange_rates"
CHARGES = "/lanes/0/charges"
FAULTS: list[tuple[Change, str, str]] = [
    (lambda document: document.update(exchange_rates={}), RATES, "wrong_type"),
    (with_rates(5), f"{RATES}/0", "wrong_type"),
    (with_rates(RATE | {"rate": "0"}), f"{RATES}/0/rate", "not_above_zero"),
    (with_rates(RATE | {"per": "0"}), f"{RATES}/0/per", "not_above_zero"),
    (with_rates({"currency": "NOK"}), f"{RATES}/0/rate", "missing_field"),
    (with_rates(RATE | {"currency": "EUR"}), f"{RATES}/0/currency", "rate_to_itself"),
    (with_rates(RATE | {"currency": "XAU"}), f"{RATES}/0/currency", "unknown_currency"),
    (with_rates(RATE, RATE), f"{RATES}/1/currency", "duplicate_value"),
    (with_rates(RATE | {"as_of": "3 Feb"}), f"{RATES}/0/as_of", "bad_date"),
    (with_rates(RATE | {"bid": "1"}), f"{RATES}/0/bid", "unknown_field"),
    (in_currency("lanes", "NOK"), "/lanes/0/currency", "exchange_rate_missing"),
    (in_currency("supply", "NOK"), "/supply/0/currency", "exchange_rate_missing"),
    (in_currency("lanes", "nok"), "/lanes/0/currency", "unknown_currency"),
    (in_currency("lanes", 7), "/lanes/0/currency", "wrong_type"),
    (in_currency("lanes", "EUR"), "", ""),
    (in_currency("supply", None), "", ""),
    (lambda document: document["lanes"][0].update(charges="x"), CHARGES, "wrong_type"),
    (with_charges(*({**DUTY, "name": str(n)} for n in range(17))), CHARGES, "wrong_type"),
    (with_charges("x"), CHARGES, "wrong_type"),
    (with_charges(DUTY | {"colour": 1}), CHARGES, "unknown_field"),
    (with_charges({"name": "duty", "rate": "1"}), CHARGES, "missing_field"),
    (with_charges(DUTY | {"percent": "1"}), CHARGES, "rate_or_percent"),
    (with_charges(DUTY | {"basis": "value"}), CHARGES, "rate_or_percent"),
    (with_charges(DUTY | {"rate": "-1"}), CHARGES, "negative_number"),
    (with_charges(DUTY, DUTY), CHARGES, "duplicate_value"),
    (with_charges(DUTY | {"items": ["NONE"]}), CHARGES, "unknown_item"),
    (with_charges(DUTY | {"currency": "NOK"}), CHARGES, "exchange_rate_missing"),
    (with_charges(DUTY | {"basis": "crate"}), CHARGES, "measure_unknown"),
    (
        with_charges({"name": "c", "basis": "value", "percent": "1", "currency": "EUR"}),
        CHARGES,
        "currency_of_percent",
    ),
    (with_charges({"name": "c", "basis": "value", "percent": "1"}), CHARGES, "measure_unknown"),
    (with_charges(), "", ""),
    (with_charges(DUTY), "", ""),
    (lambda document: document["items"][0].update(value="-1"), "/items/0/value", "negative_number"),
]


@pytest.mark.parametrize(("change", "place", "code"), FAULTS)
def test_each_fault_of_money_has_its_place(
    change: Change, place: str, code: str, tmp_path: Path
) -> None:
    """One change at a time, and one fault for it; no code: the network stays sound."""
    assert found_after(change, tmp_path) == ([(place, code)] if code else [])


def test_one_network_has_one_digest_however_its_money_is_written(tmp_path: Path) -> None:
    """The plan's own currency, an empty list and a rate for one unit say nothing."""
    document = sound()
    document["exchange_rates"] = [RATE, {"currency": "SEK", "rate": 0.0912}]
    document["lanes"][0] |= {"charges": [DUTY, {"name": "cover", "basis": "unit", "rate": "1"}]}
    other = copy.deepcopy(document)
    other["exchange_rates"] = [
        {"currency": "SEK", "rate": "0.09120", "per": "1.0", "source": None},
        RATE | {"per": 1},
    ]
    other["lanes"][0]["currency"] = "EUR"
    other["lanes"][0]["charges"] = [
        {"name": "cover", "basis": "unit", "rate": 1, "currency": "EUR"},
        DUTY | {"items": None},
    ]
    other["supply"][0]["currency"] = "EUR"

    assert digest(document, tmp_path / "a") == digest(other, tmp_path / "b")
    other["lanes"][0]["charges"][0]["rate"] = 2
    assert digest(document, tmp_path / "a") != digest(other, tmp_path / "b")


def test_money_comes_back_from_the_normal_form(tmp_path: Path) -> None:
    """What is stored is what is planned from: currencies as columns, rates in the head."""
    document = sound()
    document["exchange_rates"] = [RATE]
    document["lanes"][0] |= {"currency": "NOK", "charges": [DUTY]}
    document["items"][0]["value"] = "8.5"

    digest(document, tmp_path)
    network = read_network(tmp_path / "network.zip")

    assert network.head["exchange_rates"] == [RATE]
    assert network.lanes.currency.values == ("NOK",)
    assert network.lanes.charges.values == ('[{"basis":"weight","name":"duty","rate":"0.05"}]',)
    assert {str(item.value) for item in network.items} == {"17/2", "None"}


def test_a_faulty_rate_is_reported_once(tmp_path: Path) -> None:
    """Rows in its currency are not blamed for it."""
    document = sound()
    document["exchange_rates"] = [RATE | {"rate": "x"}]
    document["lanes"][0]["currency"] = "NOK"

    assert found(check(document, tmp_path)) == [(f"{RATES}/0/rate", "not_a_number")]
