"""What the tariffs of a stored network must satisfy."""

import re
from collections.abc import Mapping
from itertools import pairwise
from typing import Any

from service.network.columns import Network
from service.network.money import factors
from service.network.normal_values import decimal_of, is_date, must
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
    must(isinstance(tariffs, list) and bool(tariffs), "tariffs is no array with elements")
    for tariff in tariffs:
        must(isinstance(tariff, dict), "a tariff is no object")
        must(set(tariff) <= _TEXTS | _DATES | _AMOUNTS | _OTHERS, "a field of a tariff")
        _check_tariff(tariff)
        code = tariff.get("currency")
        must(code is None or code != head.get("currency"), "a tariff in the plan's own currency")
    for former, latter in pairwise(tariffs):
        names = former["id"].encode(), latter["id"].encode()
        must(names[0] <= names[1], "tariffs are not sorted")
        apart = former.get("valid_until", "9999-99") < latter.get("valid_from", "")
        must(names[0] != names[1] or apart, "two tariffs of one id hold on one day")


def check_tariffs_named(network: Network) -> None:
    """Raise unless each lane names a tariff that is there, and each currency has a rate."""
    tariffs: Any = network.head.get("tariffs", ())
    known = {tariff["id"] for tariff in tariffs}
    must(set(network.lanes.tariff.values) <= known, "an unknown tariff")
    codes = {tariff.get("currency") for tariff in tariffs}
    must(codes <= set(factors(network.head)), "a tariff in a currency without a rate")


def _check_tariff(tariff: Mapping[str, Any]) -> None:
    """Raise unless one tariff is normal."""
    for field in _TEXTS & set(tariff):
        must(isinstance(tariff[field], str) and bool(tariff[field]), f"a tariff's {field}")
    must({"id", "basis"} <= set(tariff), "a tariff without id or basis")
    for field in _DATES & set(tariff):
        must(is_date(tariff[field]), f"a tariff's {field}")
    for field in _AMOUNTS & set(tariff):
        must(decimal_of(tariff[field]) > 0, f"a tariff's {field}")
    percent = tariff.get("surcharge_percent", "1")
    must(decimal_of(percent) > -100 and percent != "0", "a surcharge")
    must(("kg_per_m3" in tariff) == (tariff["basis"] == CHARGEABLE), "kg_per_m3")
    breaks = tariff.get("breaks")
    must(isinstance(breaks, list) and bool(breaks), "no breaks")
    for one in tariff["breaks"]:
        must(isinstance(one, dict) and set(one) == {"from", "rate"}, "no break")
        must(decimal_of(one["rate"]) >= 0, "a rate below 0")
    starts = [decimal_of(one["from"]) for one in tariff["breaks"]]
    must(starts[0] == 0, "breaks do not begin at 0")
    must(all(former < latter for former, latter in pairwise(starts)), "breaks are not sorted")
    several = len(starts) > 1
    kinds = ("incremental", "all_units") if several else (None,)
    must(tariff.get("break_type") in kinds, "a break type")
    must(tariff.get("pay_up", True) is True, "pay_up is not true")
    must("pay_up" not in tariff or tariff.get("break_type") == "all_units", "pay_up")
    ends = tariff.get("valid_from", ""), tariff.get("valid_until", "9999-99")
    must(ends[0] <= ends[1], "a tariff ends before it begins")
