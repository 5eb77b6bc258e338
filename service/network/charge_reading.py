"""Charges of a lane as sent, brought to their normal form or refused with what to do."""

from collections.abc import Callable, Mapping
from typing import Any, Final

from service.network import kinds
from service.network.canonical_json import canonical_json
from service.network.currency_reading import Currencies
from service.network.kinds import Kind, RefusedError
from service.network.money import VALUE
from service.network.quantities import exact_text
from service.network.table_reading import UNSURE, UNSURE_WORD, Spelled
from service.network.value_schemas import ID_SCHEMA, IDS_SCHEMA, RATE_SCHEMA, Schema

CHARGES_MAX: Final = 16
CHARGE_SCHEMA: Final[Schema] = {
    "type": "object",
    "description": "What is paid on top of transport for goods on this lane.",
    "examples": [{"name": "duty", "basis": "value", "percent": "2.5", "items": ["0025"]}],
    "properties": {
        "name": {**ID_SCHEMA, "description": "Its name, once a lane.", "examples": ["duty"]},
        "basis": {
            **ID_SCHEMA,
            "description": "unit, weight (kg), volume (m3), a pack of the item, or value.",
            "examples": ["weight"],
        },
        "rate": {**RATE_SCHEMA, "description": "Money per unit of the basis.", "examples": ["2"]},
        "percent": {
            **RATE_SCHEMA,
            "description": "Percent of the item's value, where the basis is value.",
            "examples": ["2.5"],
        },
        "currency": {
            **kinds.CURRENCY.schema,
            "description": "Of the rate; absent: the plan's.",
            "examples": ["NOK"],
        },
        "items": {
            **IDS_SCHEMA,
            "minItems": 1,
            "description": "Whom it concerns; absent: every item on the lane.",
            "examples": [["0025"]],
        },
    },
    "required": ["name", "basis"],
    "additionalProperties": False,
}
_ADVICE: Final = (
    f"Say an array of at most {CHARGES_MAX} charges: objects with name, basis (unit, weight, "
    "volume, a pack, or value) and rate, or percent where the basis is value."
)
_KINDS: Final[Mapping[str, Kind]] = {
    "name": kinds.ID,
    "basis": kinds.ID,
    "rate": kinds.RATE,
    "percent": kinds.RATE,
    "currency": kinds.CURRENCY,
    "items": kinds.PICKS,
}


def charge_speller(items: Mapping[str, int], currencies: Currencies) -> Callable[[object], Spelled]:
    """Return a reader of the charges of one lane; ``items`` are the ids that are known."""

    def spell(value: object) -> Spelled:
        if not isinstance(value, list) or len(value) > CHARGES_MAX:
            return Spelled(None, "wrong_type", _ADVICE)
        try:
            charges = [_charge(one, currencies) for one in value]
        except RefusedError as error:
            return Spelled(None, error.code, error.detail)
        names = [charge["name"] for charge in charges]
        if len(set(names)) < len(names):
            detail = "Two charges of one lane have one name. Add them up, or rename one."
            return Spelled(None, "duplicate_value", detail)
        named = {item for charge in charges for item in charge.get("items", ())}
        strange = sorted(named - set(items))
        if strange:
            return Spelled(None, "unknown_item", f"There is no item of the id '{strange[0]}'.")
        if any(items[item] == UNSURE for item in named):
            return UNSURE_WORD
        charges.sort(key=lambda charge: charge["name"].encode())
        return Spelled(canonical_json(charges).decode() if charges else "")

    return spell


def _charge(value: object, currencies: Currencies) -> dict[str, Any]:
    """Return one charge in its normal form."""
    if not isinstance(value, dict):
        raise RefusedError("wrong_type", _ADVICE)
    strange = sorted(set(value) - set(_KINDS))
    if strange:
        raise RefusedError("unknown_field", f"A charge has no field '{strange[0]}'. {_ADVICE}")
    found = {name: _read(name, sent) for name, sent in value.items() if sent is not None}
    for name in ("name", "basis"):
        if name not in found:
            raise RefusedError("missing_field", f"A charge needs {name}. {_ADVICE}")
    amount = "percent" if found["basis"] == VALUE else "rate"
    if amount not in found or len({"rate", "percent"} & set(found)) > 1:
        detail = f"A charge by {found['basis']} has a {amount}, and no other amount."
        raise RefusedError("rate_or_percent", detail)
    if amount == "percent" and "currency" in found:
        detail = "A percentage of the value is in the currency of the plan. Drop the currency."
        raise RefusedError("currency_of_percent", detail)
    found[amount] = exact_text(found[amount])
    if "currency" in found:
        word = currencies.spelled(found.pop("currency"))
        if word.text is None:
            raise RefusedError(word.code, word.detail)
        found |= {"currency": word.text} if word.text else {}
    if "items" in found:
        found["items"] = list(found["items"])
    return found


def _read(name: str, sent: object) -> Any:  # noqa: ANN401 - the field's kind says what comes out
    """Return one field of a charge; its name is part of what is said of a fault."""
    try:
        return _KINDS[name].read(sent)
    except RefusedError as error:
        raise RefusedError(error.code, f"A charge's {name}: {error.detail}") from None
