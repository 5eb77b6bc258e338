"""The kinds of value that the small parts of a network definition are made of.

Each kind is a reader and the JSON Schema that says the same. Readers see values as
``files/json.py`` gives them: text, ``Number`` (the digits as sent), true, false, null, arrays and
objects. Null means absent wherever a field is optional.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import date
from fractions import Fraction
from functools import lru_cache
from typing import Any, Final
from zoneinfo import ZoneInfo

from service.network.currencies import is_currency, minor_units
from service.network.files.json import Number
from service.network.gs1 import is_gln, is_gtin
from service.network.moments import Instant, read_date, read_instant
from service.network.quantities import (
    QUANTITY_DECIMALS_MAX,
    RATE_DECIMALS_MAX,
    NumberFaultError,
    read_decimal,
)
from service.network.value_schemas import (
    DATE_SCHEMA,
    EXTRA_SCHEMA,
    ID_SCHEMA,
    IDS_SCHEMA,
    INSTANT_SCHEMA,
    NAME_SCHEMA,
    NOTE_SCHEMA,
    QUANTITY_SCHEMA,
    RATE_SCHEMA,
    ROLES,
    ROLES_SCHEMA,
    SIGNED_SCHEMA,
    Schema,
    dates_schema,
)
from service.network.wording import (
    EXTRA_ADVICE,
    ID_ADVICE,
    NAME_ADVICE,
    TAGS_ADVICE,
    is_extra,
    is_id,
    is_id_list,
    is_name,
    is_note,
)

# More days than a plan can be made for, and few enough to be looked at one by one.
DATES_MAX: Final = 400
# A name is up to three ids with every character percent-encoded, and a number.
LANE_NAME_CHARACTERS_MAX: Final = 3 * 3 * 64 + 24


class RefusedError(ValueError):
    """A value that is not of its kind; becomes a fault of ``code``."""

    def __init__(self, code: str, detail: str) -> None:
        """Keep the stable code beside the sentence for a person."""
        super().__init__(detail)
        self.code = code
        self.detail = detail


@dataclass(frozen=True, slots=True, kw_only=True)
class Kind:
    """A kind of value: its reader, which raises ``RefusedError``, and its JSON Schema."""

    read: Callable[[object], Any]
    schema: Schema


def is_whole(value: object) -> bool:
    """Return whether a JSON value is a whole number of at most 18 digits."""
    return isinstance(value, Number) and value.isascii() and value.isdigit() and len(value) <= 18


def as_decimal(
    value: object, *, decimals_max: int, least: int | None, above: int | None = None
) -> Fraction:
    """Read a decimal within its bounds."""
    if not isinstance(value, str):
        raise RefusedError("wrong_type", "Send a number, or a number as text.")
    try:
        number = read_decimal(value, decimals_max=decimals_max)
    except NumberFaultError as error:
        raise RefusedError(error.code, error.detail) from None
    if least is not None and number < least:
        raise RefusedError("negative_number", "A negative number makes no sense here.")
    if above is not None and number <= above:
        raise RefusedError("not_above_zero", "Say a number above 0.")
    return number


def _text(value: object) -> str:
    """Return a value that is text."""
    if type(value) is not str:
        raise RefusedError("wrong_type", "Send text.")
    return value


def _checked(accepts: Callable[[str], bool], code: str, advice: str) -> Callable[[object], str]:
    """Return a reader of texts that ``accepts`` takes."""

    def read(value: object) -> str:
        text = _text(value)
        if not accepts(text):
            raise RefusedError(code, advice)
        return text

    return read


def _format(value: object) -> int:
    """Read the number of the format of the definition."""
    if not isinstance(value, Number) or value != "1":
        raise RefusedError("unknown_format", "This service reads format 1. Send the number 1.")
    return 1


def _currency(value: object) -> str:
    """Read the currency of the plan."""
    code = _text(value)
    if not is_currency(code):
        raise RefusedError("unknown_currency", "Say a currency of ISO 4217, such as EUR.")
    if minor_units(code) is None:
        raise RefusedError(
            "unknown_currency", "This code of ISO 4217 has no minor unit to price in."
        )
    return code


def _instant(value: object) -> Instant:
    """Read a point in time."""
    text = _text(value)
    try:
        return read_instant(text)
    except ValueError as error:
        raise RefusedError("bad_time", str(error)) from None


def _date(value: object) -> date:
    """Read a calendar date."""
    text = _text(value)
    try:
        return read_date(text)
    except ValueError as error:
        raise RefusedError("bad_date", str(error)) from None


@lru_cache(maxsize=1024)
def is_time_zone(name: str) -> bool:
    """Return whether the time zone database knows ``name``."""
    try:
        ZoneInfo(name)
    # The database is files: a name can also be a folder's, or none that a file can have.
    except (ValueError, KeyError, OSError):
        return False
    return True


def is_country(text: str) -> bool:
    """Return whether ``text`` has the form of an ISO 3166 alpha-2 code."""
    return len(text) == 2 and text.isascii() and text.isalpha() and text.isupper()


def _roles(value: object) -> tuple[str, ...]:
    """Read what a site can do."""
    advice = f"Say an array of one or more of: {', '.join(ROLES)}; each once."
    if not isinstance(value, list) or not value:
        raise RefusedError("bad_roles", advice)
    if not all(type(role) is str and role in ROLES for role in value):
        raise RefusedError("bad_roles", advice)
    if len(set(value)) < len(value):
        raise RefusedError("duplicate_value", advice)
    return _sorted_roles(tuple(value))


@lru_cache(maxsize=64)
def _sorted_roles(roles: tuple[str, ...]) -> tuple[str, ...]:
    """Return roles in order, the same object for all sites that have them."""
    return tuple(sorted(roles))


def _tags(value: object) -> tuple[str, ...]:
    """Read tags: different ids."""
    if not is_id_list(value):
        raise RefusedError("wrong_type", TAGS_ADVICE)
    tags: list[str] = value  # type: ignore[assignment] # is_id_list says so
    return tuple(sorted(tags))


def _extra(value: object) -> Mapping[str, str]:
    """Read what is stored and echoed, never interpreted."""
    if not is_extra(value):
        raise RefusedError("bad_extra", EXTRA_ADVICE)
    pairs: Mapping[str, str] = value  # type: ignore[assignment] # is_extra says so
    return pairs


def _handling_cost(value: object) -> Mapping[str, Fraction]:
    """Read money per unit that passes: one for all items (under the name ""), or by item."""
    if not isinstance(value, dict):
        return {"": as_decimal(value, decimals_max=RATE_DECIMALS_MAX, least=None)}
    if "" in value:
        raise RefusedError("bad_id", ID_ADVICE)
    return {
        item: as_decimal(cost, decimals_max=RATE_DECIMALS_MAX, least=None)
        for item, cost in value.items()
    }


def _choices(characters_max: int) -> Callable[[object], tuple[str, ...]]:
    """Return a reader of the alternatives of a selector: one or more different texts."""

    def read(value: object) -> tuple[str, ...]:
        if not isinstance(value, list) or not all(
            type(text) is str and 1 <= len(text) <= characters_max for text in value
        ):
            raise RefusedError("wrong_type", "Send an array of texts.")
        if not value:
            raise RefusedError(
                "empty_list", "An empty array picks nothing. Leave the key out for all."
            )
        if len(set(value)) < len(value):
            raise RefusedError("duplicate_value", "Name each value once.")
        return tuple(sorted(value))

    return read


def one_of(*choices: str) -> Callable[[object], str]:
    """Return a reader of one of a few words."""
    return _checked(choices.__contains__, "bad_choice", f"Say one of: {', '.join(choices)}.")


def _count(value: object) -> int:
    """Read a number of rows."""
    if not is_whole(value):
        raise RefusedError("bad_number", "Send a whole number that is not negative.")
    return int(str(value))


def _rate(value: object) -> Fraction:
    """Read a weight, volume, or other number of up to six decimals, not negative."""
    return as_decimal(value, decimals_max=RATE_DECIMALS_MAX, least=0)


def _quantity(value: object) -> Fraction:
    """Read a quantity that is not negative."""
    return as_decimal(value, decimals_max=QUANTITY_DECIMALS_MAX, least=0)


def _positive(value: object) -> Fraction:
    """Read a quantity above 0."""
    return as_decimal(value, decimals_max=QUANTITY_DECIMALS_MAX, least=None, above=0)


def _positive_rate(value: object) -> Fraction:
    """Read a rate above 0."""
    return as_decimal(value, decimals_max=RATE_DECIMALS_MAX, least=None, above=0)


def _degrees(most: int) -> Callable[[object], Fraction]:
    """Return a reader of a coordinate."""

    def read(value: object) -> Fraction:
        degrees = as_decimal(value, decimals_max=RATE_DECIMALS_MAX, least=None)
        if abs(degrees) > most:
            raise RefusedError("out_of_range", f"Say degrees from -{most} to {most}.")
        return degrees

    return read


_read_id = _checked(is_id, "bad_id", ID_ADVICE)
_read_name = _checked(is_name, "bad_text", NAME_ADVICE)
_read_note = _checked(
    is_note, "bad_text", "At most 2000 characters, no control characters but line ends and tabs."
)
_read_gtin = _checked(
    is_gtin, "bad_gtin", "No GTIN of 8, 12, 13 or 14 digits with the right check digit."
)
_read_gln = _checked(is_gln, "bad_gln", "No GLN of 13 digits with the right check digit.")
_read_zone = _checked(
    is_time_zone, "unknown_time_zone", "Say a time zone of the IANA database: Europe/Oslo."
)
_read_country = _checked(is_country, "bad_country", "Say two capital letters (ISO 3166): NO.")


def _dates(value: object) -> tuple[date, ...]:
    """Read different dates, in whatever order."""
    if not isinstance(value, list) or not 1 <= len(value) <= DATES_MAX:
        raise RefusedError("bad_periods", f"Send an array of 1 to {DATES_MAX} dates.")
    found = sorted(_date(element) for element in value)
    if len(set(found)) < len(found):
        raise RefusedError("bad_periods", "A date stands here twice.")
    return tuple(found)


FORMAT = Kind(read=_format, schema={"const": 1})
CURRENCY = Kind(read=_currency, schema={"type": "string", "pattern": "^[A-Z]{3}$"})
INSTANT = Kind(read=_instant, schema=INSTANT_SCHEMA)
DATE = Kind(read=_date, schema=DATE_SCHEMA)
DATES = Kind(read=_dates, schema=dates_schema(DATES_MAX))
ID = Kind(read=_read_id, schema=ID_SCHEMA)
NAME = Kind(read=_read_name, schema=NAME_SCHEMA)
NOTE = Kind(read=_read_note, schema=NOTE_SCHEMA)
GTIN = Kind(read=_read_gtin, schema={"type": "string", "pattern": "^([0-9]{8}|[0-9]{12,14})$"})
GLN = Kind(read=_read_gln, schema={"type": "string", "pattern": "^[0-9]{13}$"})
ZONE = Kind(read=_read_zone, schema={"type": "string"})
COUNTRY = Kind(read=_read_country, schema={"type": "string", "pattern": "^[A-Z]{2}$"})
RATE = Kind(read=_rate, schema=RATE_SCHEMA)
QUANTITY = Kind(read=_quantity, schema=QUANTITY_SCHEMA)
POSITIVE = Kind(read=_positive, schema=QUANTITY_SCHEMA)
POSITIVE_RATE = Kind(read=_positive_rate, schema=RATE_SCHEMA)
LATITUDE = Kind(read=_degrees(90), schema=SIGNED_SCHEMA)
LONGITUDE = Kind(read=_degrees(180), schema=SIGNED_SCHEMA)
ROLE_LIST = Kind(read=_roles, schema=ROLES_SCHEMA)
TAGS = Kind(read=_tags, schema=IDS_SCHEMA)
EXTRA = Kind(read=_extra, schema=EXTRA_SCHEMA)
HANDLING_COST = Kind(
    read=_handling_cost,
    schema={
        "anyOf": [
            *SIGNED_SCHEMA["anyOf"],
            {"type": "object", "additionalProperties": SIGNED_SCHEMA},
        ]
    },
)
PICKS = Kind(read=_choices(64), schema={**IDS_SCHEMA, "minItems": 1})
PICKS_LANES = Kind(
    read=_choices(LANE_NAME_CHARACTERS_MAX),
    schema={
        "type": "array",
        "items": {"type": "string", "minLength": 1, "maxLength": LANE_NAME_CHARACTERS_MAX},
        "uniqueItems": True,
        "minItems": 1,
    },
)
COUNT = Kind(read=_count, schema={"type": "integer", "minimum": 0})
FLOW = Kind(
    read=one_of("received", "sent", "through"), schema={"enum": ["received", "sent", "through"]}
)
PER = Kind(read=one_of("each", "together"), schema={"enum": ["each", "together"]})
