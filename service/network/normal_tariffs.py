"""What the tariffs of a stored network must satisfy."""

import re
from collections.abc import Mapping
from datetime import date
from itertools import pairwise
from typing import Any

from service.network.column_bytes import NormalFormError
from service.network.columns import Network
from service.network.money import factors
from service.network.normal_money import decimal_of
from service.network.tariffs import CHARGEABLE

_TEXTS = frozenset({"id", "carrier", "currency", "version", "source", "basis"})
_DATES = frozenset({"valid_from", "valid_until"})
_AMOUNTS = frozenset({"kg_per_m3", "minimum_charge", "round_up_to", "round_money"})
_OTHERS = frozenset({"breaks", "break_type", "pay_up", "surcharge_percent"})
_CURRENCY = re.compile(r"[A-Z]{3}")


def check_tariffs(head: Mapping[str, Any]) -> None:
    """Raise ``NormalFormError`` unless the tariffs of a head are normal and do not overlap."""
    if "tariffs" not in head:
        return
    tariffs = head["tariffs"]
    _check(isinstance(tariffs, list) and bool(tariffs), "tariffs is no array with elements")
    for tariff in tariffs:
        _check(isinstance(tariff, dict), "a tariff is no object")
        _check(set(tariff) <= _TEXTS | _DATES | _AMOUNTS | _OTHERS, "a field of a tariff")
        _check_tariff(tariff)
        code = tariff.get("currency")
        _check(code is None or code != head.get("currency"), "a tariff in the plan's own currency")
    for former, latter in pairwise(tariffs):
        names = former["id"].encode(), latter["id"].encode()
        _check(names[0] <= names[1], "tariffs are not sorted")
        apart = former.get("valid_until", "9999-99") < latter.get("valid_from", "")
        _check(names[0] != names[1] or apart, "two tariffs of one id hold on one day")


def check_tariffs_named(network: Network) -> None:
    """Raise unless each lane names a tariff that is there, and each currency has a rate."""
    tariffs: Any = network.head.get("tariffs", ())
    known = {tariff["id"] for tariff in tariffs}
    _check(set(network.lanes.tariff.values) <= known, "an unknown tariff")
    codes = {tariff.get("currency") for tariff in tariffs}
    _check(codes <= set(factors(network.head)), "a tariff in a currency without a rate")


def _check_tariff(tariff: Mapping[str, Any]) -> None:
    """Raise unless one tariff is normal."""
    for field in _TEXTS & set(tariff):
        _check(isinstance(tariff[field], str) and bool(tariff[field]), f"a tariff's {field}")
    _check({"id", "basis"} <= set(tariff), "a tariff without id or basis")
    for field in _DATES & set(tariff):
        _check(_is_date(tariff[field]), f"a tariff's {field}")
    for field in _AMOUNTS & set(tariff):
        _check(decimal_of(tariff[field]) > 0, f"a tariff's {field}")
    percent = tariff.get("surcharge_percent", "1")
    _check(decimal_of(percent) > -100 and percent != "0", "a surcharge")
    _check(("kg_per_m3" in tariff) == (tariff["basis"] == CHARGEABLE), "kg_per_m3")
    breaks = tariff.get("breaks")
    _check(isinstance(breaks, list) and bool(breaks), "no breaks")
    for one in tariff["breaks"]:
        _check(isinstance(one, dict) and set(one) == {"from", "rate"}, "no break")
        _check(decimal_of(one["rate"]) >= 0, "a rate below 0")
    starts = [decimal_of(one["from"]) for one in tariff["breaks"]]
    _check(starts[0] == 0, "breaks do not begin at 0")
    _check(all(former < latter for former, latter in pairwise(starts)), "breaks are not sorted")
    several = len(starts) > 1
    kinds = ("incremental", "all_units") if several else (None,)
    _check(tariff.get("break_type") in kinds, "a break type")
    _check(tariff.get("pay_up", True) is True, "pay_up is not true")
    _check("pay_up" not in tariff or tariff.get("break_type") == "all_units", "pay_up")
    ends = tariff.get("valid_from", ""), tariff.get("valid_until", "9999-99")
    _check(ends[0] <= ends[1], "a tariff ends before it begins")


def _is_date(text: object) -> bool:
    """Return whether a text is a date as ISO 8601 writes it."""
    try:
        return isinstance(text, str) and date.fromisoformat(text).isoformat() == text
    except ValueError:
        return False


def _check(holds: bool, detail: str) -> None:  # noqa: FBT001 - reads like an assertion
    """Raise ``NormalFormError`` with ``detail`` unless ``holds``."""
    if not holds:
        raise NormalFormError(detail)
