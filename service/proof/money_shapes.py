"""Format 1 of what a plan says of money: other currencies, charges, freight by tariffs."""

from service.proof.shapes import is_amount, is_text, list_of, or_null, record

_TEXT_OR_NULL = or_null(is_text)

STATED = record({"currency": is_text, "transport_cost": is_amount})
CHARGE_PART = record(
    {"name": is_text, "cost": is_amount}, {"currency": is_text, "stated_cost": is_amount}
)
CURRENCY = record(
    {
        "currency": is_text,
        "as_of": _TEXT_OR_NULL,
        "source": _TEXT_OR_NULL,
        **dict.fromkeys(("rate", "per", "supply", "transport", "charges"), is_amount),
        **dict.fromkeys(("amount", "converted"), is_amount),
    }
)
FREIGHT = record(
    {
        **dict.fromkeys(("tariff", "basis", "currency"), is_text),
        **dict.fromkeys(("version", "source"), _TEXT_OR_NULL),
        **dict.fromkeys(("measured", "charged", "rate", "minimum_charge"), is_amount),
        **dict.fromkeys(("surcharge_percent", "amount", "cost"), is_amount),
        "parts": list_of(record(dict.fromkeys(("from", "quantity", "rate", "amount"), is_amount))),
    }
)
