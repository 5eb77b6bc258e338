"""Items and sites of a definition, as objects in the order of their ids, and where they were sent.

A thing that is faulty but has an id of its own stays known, as UNSURE: what refers to it is not
blamed for it.
"""

import itertools
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import TypeVar

import numpy as np

from service.network.columns import NOTHING_MORE, BoolArray, Item, Pack, Site
from service.network.definition import ItemPart, SitePart, validated
from service.network.faults import FaultList, pointer
from service.network.table_reading import UNSURE
from service.network.units import MEASURES
from service.network.value_schemas import ROLES
from service.network.wording import is_id


@dataclass(frozen=True, slots=True, kw_only=True)
class Things:
    """The sound items and sites, sorted by id; ``*_positions`` know every id, also UNSURE ones."""

    items: tuple[Item, ...]
    sites: tuple[Site, ...]
    item_positions: Mapping[str, int]
    site_positions: Mapping[str, int]

    def with_role(self, *roles: str) -> BoolArray:
        """Return, in shape (sites,), which sites have one of ``roles``."""
        # There are few kinds of sites, and maybe many sites.
        kinds = {site.roles for site in self.sites}
        wanted = {kind for kind in kinds if not kind.isdisjoint(roles)}
        return np.array([site.roles in wanted for site in self.sites], dtype=np.bool_)


def read_things(items: object, sites: object, faults: FaultList) -> Things | None:
    """Read both lists; None where one of them is no list, so that nothing can refer to it."""
    read_items = _read_list("items", items, _read_item, faults)
    read_sites = _read_list("sites", sites, _read_site, faults)
    if read_items is None or read_sites is None:
        return None
    item_positions, sound_items, _ = read_items
    site_positions, sound_sites, site_places = read_sites
    for place, site in zip(site_places, sound_sites, strict=True):
        for item in site.handling_cost:
            if item not in item_positions:
                detail = "There is no item of this id. Add it to the network, or correct the id."
                faults.add(
                    pointer("sites", place, "handling_cost", item), "unknown_item", detail, item
                )
    return Things(
        items=tuple(sound_items),
        sites=tuple(sound_sites),
        item_positions=item_positions,
        site_positions=site_positions,
    )


_Thing = TypeVar("_Thing", Item, Site)


def _read_list(
    name: str,
    values: object,
    read: Callable[[object, tuple[str | int, ...], FaultList], _Thing | None],
    faults: FaultList,
) -> tuple[dict[str, int], list[_Thing], list[int]] | None:
    """Return positions by id, sound things sorted by id, and where each of them was sent."""
    if not isinstance(values, list):
        faults.add(pointer(name), "wrong_type", "Send an array of objects.", values)
        return None
    positions: dict[str, int] = {}
    sound: dict[str, tuple[int, _Thing]] = {}
    for place, value in enumerate(values):
        thing = read(value, (name, place), faults)
        identifier = value.get("id") if isinstance(value, dict) else None
        # A thing that was read has an id for sure.
        if type(identifier) is not str or (thing is None and not is_id(identifier)):
            continue
        if identifier in positions:
            detail = f"Two {name} have this id. Keep one, or give the other an id of its own."
            faults.add(pointer(name, place, "id"), "duplicate_id", detail, identifier)
        elif thing is not None:
            sound[identifier] = (place, thing)
        positions.setdefault(identifier, UNSURE)
    order = sorted(sound, key=str.encode)
    positions |= {identifier: number for number, identifier in enumerate(order)}
    return positions, [sound[name][1] for name in order], [sound[name][0] for name in order]


def _read_item(value: object, path: tuple[str | int, ...], faults: FaultList) -> Item | None:
    """Read one item."""
    part = validated(ItemPart, value, path=path, table="items", faults=faults)
    return None if part is None else _item(part, path, faults)


def _read_site(value: object, path: tuple[str | int, ...], faults: FaultList) -> Site | None:
    """Read one site."""
    plain = _plain_site(value)
    if plain is not None:
        return plain
    part = validated(SitePart, value, path=path, table="sites", faults=faults)
    return None if part is None else _site(part)


def _item(part: ItemPart, path: tuple[str | int, ...], faults: FaultList) -> Item | None:
    """Return an item, or None where its packs contradict each other."""
    packs = part.packs or []
    units: set[str] = set()
    sound = True
    for number, pack in enumerate(packs):
        place = pointer(*path, "packs", number, "unit")
        if pack.unit == part.unit or pack.unit in MEASURES:
            detail = "A pack cannot be called as the item's unit or a measure is."
            faults.add(place, "bad_pack", detail, pack.unit)
            sound = False
        elif pack.unit in units:
            faults.add(place, "duplicate_value", "The item has two packs of this unit.", pack.unit)
            sound = False
        units.add(pack.unit)
    if not sound:
        return None
    return Item(
        id=part.id,
        unit=part.unit,
        step=Fraction(1) if part.step is None else part.step,
        name=part.name,
        gtin=part.gtin,
        weight_kg=part.weight_kg,
        volume_m3=part.volume_m3,
        packs=tuple(
            Pack(unit=pack.unit, contains=pack.contains)
            for pack in sorted(packs, key=lambda pack: pack.unit.encode())
        ),
        tags=part.tags or (),
        extra=_sorted(part.extra),
        value=part.value,
    )


def _site(part: SitePart) -> Site:
    """Return a site."""
    handling = dict(part.handling_cost) if part.handling_cost else {}
    return Site(
        id=part.id,
        roles=frozenset(part.roles),
        name=part.name,
        gln=part.gln,
        latitude=part.latitude,
        longitude=part.longitude,
        time_zone=part.time_zone,
        country=part.country,
        handling_cost_any=handling.pop("", None),
        handling_cost=_sorted(handling),
        tags=part.tags or (),
        extra=_sorted(part.extra),
    )


_ROLES_IN_ANY_ORDER = {
    roles: frozenset(roles)
    for count in range(1, len(ROLES) + 1)
    for roles in itertools.permutations(ROLES, count)
}


def _plain_site(value: object) -> Site | None:
    """Return a site that says no more than its id and roles, as most of many sites do."""
    if type(value) is not dict or value.keys() != {"id", "roles"}:
        return None
    identifier, roles = value["id"], value["roles"]
    if type(identifier) is not str or type(roles) is not list or not is_id(identifier):
        return None
    if not all(type(role) is str for role in roles):
        return None
    known = _ROLES_IN_ANY_ORDER.get(tuple(roles))
    return None if known is None else Site(id=identifier, roles=known, **NOTHING_MORE)


_Value = TypeVar("_Value", str, Fraction)


def _sorted(pairs: Mapping[str, _Value] | None) -> Mapping[str, _Value]:
    """Return pairs in the order of their names."""
    return dict(sorted(pairs.items())) if pairs else {}
