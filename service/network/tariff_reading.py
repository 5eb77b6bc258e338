"""Freight tariffs of a definition brought into the normal form in which the head keeps them.

What a tariff leaves unsaid and what it says by default are one and the same there.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any, Final

from service.network.currency_reading import Currencies
from service.network.definition import validated
from service.network.faults import FaultList, pointer
from service.network.money_definition import TariffPart
from service.network.quantities import exact_text
from service.network.table_reading import Spelled
from service.network.tariffs import CHARGEABLE

FIELD: Final = "tariffs"


@dataclass(frozen=True, slots=True, kw_only=True)
class SentTariffs:
    """The sound tariffs in normal form, sorted; ``unsure`` are ids of faulty ones."""

    documents: tuple[Mapping[str, Any], ...] = ()
    unsure: frozenset[str] = frozenset()

    def spelled(self, text: str) -> Spelled:
        """Return a tariff's id as a lane names it."""
        if text in self.unsure or any(document["id"] == text for document in self.documents):
            return Spelled(text)
        detail = "There is no tariff of this id. Add it to the network, or correct the id."
        return Spelled(None, "unknown_tariff", detail)


def read_tariffs(value: object, currencies: Currencies, faults: FaultList) -> SentTariffs:
    """Read all tariffs, several of one id for periods that do not overlap."""
    if value is None:
        return SentTariffs()
    if not isinstance(value, list):
        faults.add(pointer(FIELD), "wrong_type", "Send an array of tariffs.", value)
        return SentTariffs()
    found: list[tuple[int, dict[str, Any]]] = []
    unsure: set[str] = set()
    for place, document in enumerate(value):
        part = validated(TariffPart, document, path=(FIELD, place), table=FIELD, faults=faults)
        normal = None if part is None else _normal(part, place, currencies, faults)
        if normal is not None:
            found.append((place, normal))
        elif isinstance(document, dict) and type(document.get("id")) is str:
            unsure.add(document["id"])
    found.sort(key=lambda pair: tariff_key(pair[1]))
    for (_, former), (place, latter) in pairwise(found):
        if former["id"] == latter["id"] and not _follows(former, latter):
            detail = (
                "Another tariff of this id holds on some of the same days. Say valid_from and "
                "valid_until so that on each day one holds, or give it another id."
            )
            faults.add(pointer(FIELD, place, "id"), "tariffs_overlap", detail, latter["id"])
    return SentTariffs(documents=tuple(document for _, document in found), unsure=frozenset(unsure))


def tariff_key(document: Mapping[str, Any]) -> tuple[bytes, str]:
    """Return what tariffs are sorted by: their id, and the day from which they hold."""
    return document["id"].encode(), document.get("valid_from", "")


def _follows(former: Mapping[str, Any], latter: Mapping[str, Any]) -> bool:
    """Return whether ``latter`` begins after ``former`` ends."""
    return bool(former.get("valid_until", "9999-99") < latter.get("valid_from", ""))


def _normal(
    part: TariffPart, place: int, currencies: Currencies, faults: FaultList
) -> dict[str, Any] | None:
    """Return the normal form of a tariff, or None after reporting what it lacks or contradicts."""
    flaws = [*_shape_flaws(part), *_break_flaws(part)]
    currency = Spelled("") if part.currency is None else currencies.spelled(part.currency)
    if currency.text is None:
        flaws.append(("currency", currency.code, currency.detail))
    for name, code, detail in flaws:
        faults.add(pointer(FIELD, place, name), code, detail)
    if flaws:
        return None
    several = len(part.breaks) > 1
    document: dict[str, Any] = {
        "id": part.id,
        "carrier": part.carrier,
        "currency": currency.text or None,
        "valid_from": None if part.valid_from is None else part.valid_from.isoformat(),
        "valid_until": None if part.valid_until is None else part.valid_until.isoformat(),
        "version": part.version,
        "source": part.source,
        "basis": part.basis,
        "breaks": [
            {"from": exact_text(one.start), "rate": exact_text(one.rate)} for one in part.breaks
        ],
        "break_type": part.break_type if several else None,
        "pay_up": True if several and part.pay_up else None,
    }
    for name in (
        *("kg_per_m3", "minimum_charge", "surcharge_percent", "round_up_to", "round_money"),
    ):
        amount = getattr(part, name)
        document[name] = exact_text(amount) if amount else None
    return {key: value for key, value in document.items() if value is not None}


def _shape_flaws(part: TariffPart) -> Sequence[tuple[str, str, str]]:
    """Return (field, code, sentence) of what fields say of one another."""
    flaws = []
    if (part.kg_per_m3 is not None) != (part.basis == CHARGEABLE):
        detail = f"kg_per_m3 belongs to the basis {CHARGEABLE}: say both, or neither."
        flaws.append(("kg_per_m3", "kg_per_m3", detail))
    if part.pay_up and part.break_type != "all_units":
        detail = "To pay up to a cheaper break is for break_type all_units. Drop it, or say so."
        flaws.append(("pay_up", "pay_up", detail))
    if len(part.breaks) > 1 and part.break_type is None:
        detail = (
            "Say incremental (each rate for what lies beyond its break) or all_units (the rate of "
            "the break that is reached for everything)."
        )
        flaws.append(("break_type", "missing_field", detail))
    backwards = part.valid_from and part.valid_until and part.valid_until < part.valid_from
    if backwards:
        detail = "The tariff ends (valid_until) before it begins (valid_from)."
        flaws.append(("valid_until", "period_reversed", detail))
    return flaws


def _break_flaws(part: TariffPart) -> Sequence[tuple[str, str, str]]:
    """Return what is wrong with the breaks."""
    starts = [one.start for one in part.breaks]
    if not starts or starts[0] != 0:
        return [("breaks", "breaks_start", "The first break is from 0.")]
    if any(former >= latter for former, latter in pairwise(starts)):
        return [("breaks", "breaks_order", "Breaks ascend, each from more than the one before.")]
    return []
