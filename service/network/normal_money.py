"""What exchange rates, currencies and charges of a stored network must satisfy."""

import json
import re
from collections.abc import Mapping
from itertools import pairwise
from typing import Any

from service.network.canonical_json import canonical_json
from service.network.column_bytes import NormalFormError
from service.network.columns import Network, Texts
from service.network.money import VALUE, factors
from service.network.normal_values import decimal_of, is_date, must

_CURRENCY = re.compile(r"[A-Z]{3}")
_RATE_FIELDS = frozenset({"currency", "rate", "per", "as_of", "source"})
_CHARGE_FIELDS = frozenset({"name", "basis", "rate", "percent", "currency", "items"})


def check_exchange_rates(head: Mapping[str, Any]) -> None:
    """Raise ``NormalFormError`` unless the exchange rates of a head are sorted and above 0."""
    if "exchange_rates" not in head:
        return
    rates = head["exchange_rates"]
    must(isinstance(rates, list) and bool(rates), "exchange_rates is no array with elements")
    for rate in rates:
        must(isinstance(rate, dict) and set(rate) <= _RATE_FIELDS, "no exchange rate")
        must(all(isinstance(text, str) for text in rate.values()), "a rate is not text")
        code = rate.get("currency", "")
        must(_CURRENCY.fullmatch(code) is not None, "no currency of a rate")
        must(code != head.get("currency"), "an exchange rate of the plan's own currency")
        must(decimal_of(rate.get("rate")) > 0, "an exchange rate of 0 or less")
        must("per" not in rate or decimal_of(rate["per"]) not in (0, 1), "per is not normal")
        must("per" not in rate or decimal_of(rate["per"]) > 0, "per is below 0")
        must("as_of" not in rate or is_date(rate["as_of"]), "as_of is no date")
    codes = [rate["currency"] for rate in rates]
    must(all(former < latter for former, latter in pairwise(codes)), "rates are not sorted")


def check_money(network: Network) -> None:
    """Raise ``NormalFormError`` unless every currency has a rate and charges are normal."""
    known = set(factors(network.head)) - {None, network.head["currency"]}
    for column in (network.lanes.currency, network.supply.currency):
        must(set(column.values) <= known, "a currency without a rate")
    _check_charges(network.lanes.charges, {item.id for item in network.items}, known)


def _check_charges(column: Texts, items: set[str], currencies: set[str | None]) -> None:
    """Raise unless each text holds charges in normal form."""
    for text in column.values:
        try:
            charges = json.loads(text)
        except ValueError as error:
            raise NormalFormError("charges are no JSON") from error
        must(isinstance(charges, list) and bool(charges), "charges are no array with elements")
        for charge in charges:
            must(isinstance(charge, dict) and set(charge) <= _CHARGE_FIELDS, "no charge")
            _check_charge(charge, items, currencies)
        names = [charge["name"].encode() for charge in charges]
        must(all(former < latter for former, latter in pairwise(names)), "charges not sorted")
        must(canonical_json(charges) == text.encode(), "charges are not canonical JSON")


def _check_charge(charge: Mapping[str, Any], items: set[str], known: set[str | None]) -> None:
    """Raise unless one charge is normal."""
    for field in ("name", "basis"):
        must(isinstance(charge.get(field), str) and bool(charge[field]), f"a charge's {field}")
    amount = "percent" if charge["basis"] == VALUE else "rate"
    must(len({"rate", "percent"} & set(charge)) == 1, "a charge of two amounts, or none")
    must(decimal_of(charge.get(amount)) >= 0, "a charge below 0")
    must("currency" not in charge or charge["currency"] in known, "a charge's currency")
    must("currency" not in charge or amount == "rate", "a percentage in a currency")
    if "items" in charge:
        named = charge["items"]
        must(isinstance(named, list) and bool(named), "a charge of no items")
        must(all(isinstance(item, str) for item in named), "items of a charge are no text")
        must(named == sorted(set(named)) and set(named) <= items, "items of a charge")
