"""Items and sites as the JSON of a network's head, and back without trust."""

import functools
import itertools
import re
from collections.abc import Mapping
from fractions import Fraction
from typing import Any

from service.network.column_bytes import NormalFormError
from service.network.columns import NOTHING_MORE, Item, Pack, Site
from service.network.normal_values import must
from service.network.quantities import exact_text

ROLES = frozenset({"warehouse", "cross_dock", "ship_to"})

DECIMAL = re.compile(r"-?(0|[1-9][0-9]{0,18})(\.[0-9]{0,5}[1-9])?")
# An id has 1 to 64 characters and no control characters (C0, DEL).
_ID = re.compile(r"[^\x00-\x1f\x7f]{1,64}")

_ITEM_FIELDS = frozenset(
    {"id", "unit", "step", "name", "gtin", "weight_kg", "volume_m3", "value", "packs", "tags"}
    | {"extra"}
)
_SITE_FIELDS = frozenset(
    {"id", "roles", "name", "gln", "latitude", "longitude", "time_zone", "country"}
    | {"handling_cost", "tags", "extra"}
)


def item_document(item: Item) -> dict[str, object]:
    """Return ``item`` as JSON, absent fields left out."""
    document: dict[str, object] = {"id": item.id, "unit": item.unit, "step": exact_text(item.step)}
    _add(document, name=item.name, gtin=item.gtin, weight_kg=item.weight_kg)
    _add(document, volume_m3=item.volume_m3, value=item.value)
    _add(document, tags=list(item.tags), extra=dict(item.extra))
    packs = [{"unit": pack.unit, "contains": exact_text(pack.contains)} for pack in item.packs]
    _add(document, packs=packs)
    return document


def site_document(site: Site) -> dict[str, object]:
    """Return ``site`` as JSON, absent fields left out."""
    if site.handling_cost_any is not None and site.handling_cost:
        raise NormalFormError(f"site {site.id!r} has two kinds of handling cost")
    by_item = {item: exact_text(cost) for item, cost in site.handling_cost.items()}
    document: dict[str, object] = {"id": site.id, "roles": _sorted_roles(site.roles)}
    _add(
        document,
        name=site.name,
        gln=site.gln,
        latitude=site.latitude,
        longitude=site.longitude,
        time_zone=site.time_zone,
        country=site.country,
        handling_cost=by_item or site.handling_cost_any,
        tags=list(site.tags),
        extra=dict(site.extra),
    )
    return document


@functools.cache
def _sorted_roles(roles: frozenset[str]) -> list[str]:
    """Return roles in order; nobody changes the list, which many sites share."""
    return sorted(roles)


def _add(document: dict[str, object], **values: object) -> None:
    """Put the values that are there into ``document``, decimals as text."""
    for key, value in values.items():
        # By identity: the general test for a Fraction would cost more than the rest.
        if type(value) is Fraction:
            document[key] = exact_text(value)
        elif value or isinstance(value, str):
            document[key] = value


def item_of(document: object) -> Item:
    """Return the item that ``document`` says; raise ``NormalFormError`` unless it is normal."""
    known = _object(document, _ITEM_FIELDS)
    packs = []
    for pack in _list(known, "packs"):
        fields = _object(pack, frozenset({"unit", "contains"}))
        packs.append(Pack(unit=_text(fields, "unit"), contains=_positive(fields, "contains")))
    units = [pack.unit.encode() for pack in packs]
    must(units == sorted(set(units)), "packs are not sorted and distinct")
    return Item(
        id=_id(known),
        unit=_text(known, "unit"),
        step=_positive(known, "step"),
        name=_text_or_none(known, "name"),
        gtin=_text_or_none(known, "gtin"),
        weight_kg=_decimal_or_none(known, "weight_kg"),
        volume_m3=_decimal_or_none(known, "volume_m3"),
        packs=tuple(packs),
        tags=_tags(known),
        extra=_texts_by_key(known, "extra"),
        value=_decimal_or_none(known, "value"),
    )


def site_of(document: object, items: frozenset[str]) -> Site:
    """Return the site that ``document`` says; raise ``NormalFormError`` unless it is normal."""
    known = _object(document, _SITE_FIELDS)
    roles = _ROLES_OF.get(_key(known.get("roles")))
    if roles is None:
        raise NormalFormError("roles are not normal")
    # Id and roles are all that most sites say: the other fields are not asked for one by one.
    if known.keys() == {"id", "roles"}:
        return Site(id=_id(known), roles=roles, **NOTHING_MORE)
    handling = known.get("handling_cost")
    by_item: dict[str, Fraction] = {}
    if isinstance(handling, dict):
        must(bool(handling) and set(handling) <= items, "handling of an unknown item")
        by_item = {item: _decimal(handling, item) for item in sorted(handling)}
    return Site(
        id=_id(known),
        roles=roles,
        name=_text_or_none(known, "name"),
        gln=_text_or_none(known, "gln"),
        latitude=_decimal_or_none(known, "latitude"),
        longitude=_decimal_or_none(known, "longitude"),
        time_zone=_text_or_none(known, "time_zone"),
        country=_text_or_none(known, "country"),
        handling_cost_any=None if by_item else _decimal_or_none(known, "handling_cost"),
        handling_cost=by_item,
        tags=_tags(known),
        extra=_texts_by_key(known, "extra"),
    )


def _key(value: object) -> str:
    """Return a text that two JSON arrays of texts share only if they are equal."""
    return repr(value) if isinstance(value, list) else ""


_ROLES_OF = {
    _key(list(roles)): frozenset(roles)
    for count in range(1, len(ROLES) + 1)
    for roles in itertools.combinations(sorted(ROLES), count)
}


def _object(document: object, fields: frozenset[str]) -> Mapping[str, Any]:
    """Return ``document`` if it is an object of known fields."""
    if not isinstance(document, dict):
        raise NormalFormError("not an object")
    must(set(document) <= fields, "an unknown field in the head")
    return document


def _list(fields: Mapping[str, Any], key: str) -> list[Any]:
    """Return an array that is not empty, or an empty one where the field is absent."""
    if key not in fields:
        return []
    value = fields[key]
    if not isinstance(value, list) or not value:
        raise NormalFormError(f"{key} is not an array with elements")
    return value


def _text(fields: Mapping[str, Any], key: str) -> str:
    """Return a text that is not empty."""
    value = fields.get(key)
    if not isinstance(value, str) or not value:
        raise NormalFormError(f"{key} is not text")
    return value


def _text_or_none(fields: Mapping[str, Any], key: str) -> str | None:
    """Return a text, or None where the field is absent."""
    if key not in fields:
        return None
    value = fields[key]
    if not isinstance(value, str):
        raise NormalFormError(f"{key} is not text")
    return value


def _id(fields: Mapping[str, Any]) -> str:
    """Return the id of an item or site."""
    value = _text(fields, "id")
    must(_ID.fullmatch(value) is not None, "an id is not 1 to 64 plain characters")
    return value


def _decimal(fields: Mapping[str, Any], key: str) -> Fraction:
    """Return the decimal whose shortest text the field holds."""
    value = fields.get(key)
    if not isinstance(value, str) or not DECIMAL.fullmatch(value) or value == "-0":
        raise NormalFormError(f"{key} is not a shortest decimal")
    return Fraction(value)


def _decimal_or_none(fields: Mapping[str, Any], key: str) -> Fraction | None:
    """Return a decimal, or None where the field is absent."""
    return _decimal(fields, key) if key in fields else None


def _positive(fields: Mapping[str, Any], key: str) -> Fraction:
    """Return a decimal above 0."""
    value = _decimal(fields, key)
    must(value > 0, f"{key} is not above 0")
    return value


def _tags(fields: Mapping[str, Any]) -> tuple[str, ...]:
    """Return sorted, distinct tags."""
    tags = _list(fields, "tags")
    must(all(isinstance(tag, str) for tag in tags), "a tag is not text")
    must(tags == sorted(set(tags)), "tags are not sorted and distinct")
    return tuple(tags)


def _texts_by_key(fields: Mapping[str, Any], key: str) -> dict[str, str]:
    """Return an object of texts, empty where the field is absent."""
    if key not in fields:
        return {}
    value = fields[key]
    if not isinstance(value, dict) or not value:
        raise NormalFormError(f"{key} is not an object with members")
    must(all(isinstance(text, str) for text in value.values()), f"{key} holds more than text")
    return dict(sorted(value.items()))
