"""Exchange rates as sent, and which currencies rows may therefore be in."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final

from service.network.definition import validated
from service.network.faults import FaultList, pointer
from service.network.kinds import CURRENCY, RefusedError
from service.network.money_definition import ExchangeRatePart
from service.network.quantities import exact_text
from service.network.table_reading import Spelled

FIELD: Final = "exchange_rates"


@dataclass(frozen=True, slots=True, kw_only=True)
class Currencies:
    """The currency of the plan (None: not known, so that no row is blamed) and those with a rate.

    ``documents`` are the exchange rates in normal form, sorted by currency.
    """

    own: str | None
    documents: tuple[Mapping[str, str], ...] = ()
    unsure: frozenset[str] = frozenset()

    def spelled(self, text: str) -> Spelled:
        """Return how the currency of a row is kept: not at all where it is that of the plan."""
        try:
            CURRENCY.read(text)
        except RefusedError as error:
            return Spelled(None, error.code, error.detail)
        if text == self.own:
            return Spelled("")
        known = {document["currency"] for document in self.documents} | self.unsure
        if self.own is None or text in known:
            return Spelled(text)
        detail = f"There is no exchange rate from {text} to {self.own}. Add it to {FIELD}."
        return Spelled(None, "exchange_rate_missing", detail)


def read_exchange_rates(value: object, own: str | None, faults: FaultList) -> Currencies:
    """Read the exchange rates to ``own``, the currency of the plan (None: it is faulty)."""
    if value is None:
        return Currencies(own=own)
    if not isinstance(value, list):
        faults.add(pointer(FIELD), "wrong_type", "Send an array of exchange rates.", value)
        return Currencies(own=None)
    found: dict[str, Mapping[str, str]] = {}
    unsure: set[str] = set()
    for place, document in enumerate(value):
        part = validated(
            ExchangeRatePart, document, path=(FIELD, place), table=FIELD, faults=faults
        )
        named = document.get("currency") if isinstance(document, dict) else None
        if part is None:
            unsure |= {named} if type(named) is str else set()
            continue
        if part.currency == own:
            detail = "This is the currency of the plan, which needs no rate. Drop it."
            faults.add(pointer(FIELD, place, "currency"), "rate_to_itself", detail, own)
        elif part.currency in found:
            detail = "Another rate is of this currency. Keep the one that holds for this plan."
            place_of = pointer(FIELD, place, "currency")
            faults.add(place_of, "duplicate_value", detail, part.currency)
        else:
            found[part.currency] = _normal(part)
    return Currencies(
        own=own,
        documents=tuple(found[code] for code in sorted(found)),
        unsure=frozenset(unsure),
    )


def _normal(part: ExchangeRatePart) -> Mapping[str, str]:
    """Return the normal form of an exchange rate: decimals as text, what is absent left out."""
    document: dict[str, str | None] = {
        "currency": part.currency,
        "rate": exact_text(part.rate),
        "per": None if part.per in (None, 1) else exact_text(part.per),
        "as_of": None if part.as_of is None else part.as_of.isoformat(),
        "source": part.source,
    }
    return {name: text for name, text in document.items() if text is not None}
