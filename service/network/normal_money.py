"""What exchange rates, currencies and charges of a stored network must satisfy."""

import json
import re
from collections.abc import Mapping
from datetime import date
from fractions import Fraction
from itertools import pairwise
from typing import Any

from service.network.canonical_json import canonical_json
from service.network.column_bytes import NormalFormError
from service.network.columns import Network, Texts
from service.network.money import VALUE, factors
from service.network.quantities import exact_text, parse_exact

_CURRENCY = re.compile(r"[A-Z]{3}")
_RATE_FIELDS = frozenset({"currency", "rate", "per", "as_of", "source"})
_CHARGE_FIELDS = frozenset({"name", "basis", "rate", "percent", "currency", "items"})


def check_exchange_rates(head: Mapping[str, Any]) -> None:
    """Raise ``NormalFormError`` unless the exchange rates of a head are sorted and above 0."""
    if "exchange_rates" not in head:
        return
    rates = head["exchange_rates"]
    _check(isinstance(rates, list) and bool(rates), "exchange_rates is no array with elements")
    for rate in rates:
        _check(isinstance(rate, dict) and set(rate) <= _RATE_FIELDS, "no exchange rate")
        _check(all(isinstance(text, str) for text in rate.values()), "a rate is not text")
        code = rate.get("currency", "")
        _check(_CURRENCY.fullmatch(code) is not None, "no currency of a rate")
        _check(code != head.get("currency"), "an exchange rate of the plan's own currency")
        _check(decimal_of(rate.get("rate")) > 0, "an exchange rate of 0 or less")
        _check("per" not in rate or decimal_of(rate["per"]) not in (0, 1), "per is not normal")
        _check("per" not in rate or decimal_of(rate["per"]) > 0, "per is below 0")
        _check("as_of" not in rate or _is_date(rate["as_of"]), "as_of is no date")
    codes = [rate["currency"] for rate in rates]
    _check(all(former < latter for former, latter in pairwise(codes)), "rates are not sorted")


def check_money(network: Network) -> None:
    """Raise ``NormalFormError`` unless every currency has a rate and charges are normal."""
    known = set(factors(network.head)) - {None, network.head["currency"]}
    for column in (network.lanes.currency, network.supply.currency):
        _check(set(column.values) <= known, "a currency without a rate")
    _check_charges(network.lanes.charges, {item.id for item in network.items}, known)


def _check_charges(column: Texts, items: set[str], currencies: set[str | None]) -> None:
    """Raise unless each text holds charges in normal form."""
    for text in column.values:
        try:
            charges = json.loads(text)
        except ValueError as error:
            raise NormalFormError("charges are no JSON") from error
        _check(isinstance(charges, list) and bool(charges), "charges are no array with elements")
        for charge in charges:
            _check(isinstance(charge, dict) and set(charge) <= _CHARGE_FIELDS, "no charge")
            _check_charge(charge, items, currencies)
        names = [charge["name"].encode() for charge in charges]
        _check(all(former < latter for former, latter in pairwise(names)), "charges not sorted")
        _check(canonical_json(charges) == text.encode(), "charges are not canonical JSON")


def _check_charge(charge: Mapping[str, Any], items: set[str], known: set[str | None]) -> None:
    """Raise unless one charge is normal."""
    for field in ("name", "basis"):
        _check(isinstance(charge.get(field), str) and bool(charge[field]), f"a charge's {field}")
    amount = "percent" if charge["basis"] == VALUE else "rate"
    _check(len({"rate", "percent"} & set(charge)) == 1, "a charge of two amounts, or none")
    _check(decimal_of(charge.get(amount)) >= 0, "a charge below 0")
    _check("currency" not in charge or charge["currency"] in known, "a charge's currency")
    _check("currency" not in charge or amount == "rate", "a percentage in a currency")
    if "items" in charge:
        named = charge["items"]
        _check(isinstance(named, list) and bool(named), "a charge of no items")
        _check(all(isinstance(item, str) for item in named), "items of a charge are no text")
        _check(named == sorted(set(named)) and set(named) <= items, "items of a charge")


def decimal_of(text: object) -> Fraction:
    """Return the value of a decimal in its one spelling; raises ``NormalFormError``.

    A fraction is no decimal, although it is exact: where it may stand, another reader is asked.
    """
    try:
        value = parse_exact(text) if isinstance(text, str) and "/" not in text else None
    except ValueError:
        value = None
    if value is None or exact_text(value) != text:
        raise NormalFormError("not a decimal in normal form")
    return value


def _is_date(text: str) -> bool:
    """Return whether a text is a date as ISO 8601 writes it."""
    try:
        return date.fromisoformat(text).isoformat() == text
    except ValueError:
        return False


def _check(holds: bool, detail: str) -> None:  # noqa: FBT001 - reads like an assertion
    """Raise ``NormalFormError`` with ``detail`` unless ``holds``."""
    if not holds:
        raise NormalFormError(detail)
