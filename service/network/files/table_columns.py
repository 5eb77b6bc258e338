"""The tables of a network as files and sheets: their columns, what each holds, and its meaning.

A column is called like the field that it holds; a field inside a field has a point between
(``keep.quantity``). ``extra.NAME`` and ``handling_cost.ITEM`` are families: a column for each name.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from enum import Enum, auto
from typing import Final


class Kind(Enum):
    """What the cells of a column are."""

    TEXT = auto()  # as it stands: zeros in front stay
    NUMBER = auto()  # an exact decimal
    WHOLE = auto()  # a small whole number
    LIST = auto()  # texts with | between, or a JSON array of texts
    MOMENT = auto()  # RFC 3339, with its offset
    DATE = auto()
    PAIRS = auto()  # a JSON object of texts
    OBJECTS = auto()  # a JSON array of objects
    FLAG = auto()  # true or false


@dataclass(frozen=True, slots=True)
class Field:
    """A column: what its cells are, what it means, and whether every row needs it."""

    kind: Kind
    meaning: str
    needed: bool = False


LIST_SEPARATOR: Final = "|"
# Instead of the columns of a selector: it picks everything.
PICKS_ALL: Final = "all"
FAMILIES: Final[Mapping[str, Field]] = {
    "extra": Field(Kind.TEXT, "extra.NAME: stored and echoed, never interpreted"),
    "handling_cost": Field(
        Kind.NUMBER, "handling_cost.ITEM: money per unit of that item, instead of handling_cost"
    ),
}

_ID: Final = "its id: up to 64 characters, kept as they stand, zeros in front too"
_TAGS: Final = "words that rules pick by, with | between"
_EXTRA: Final = Field(Kind.PAIRS, "further pairs as a JSON object, instead of extra.NAME columns")

TABLES: Final[Mapping[str, Mapping[str, Field]]] = {
    "network": {
        "format": Field(Kind.WHOLE, "1", needed=True),
        "name": Field(Kind.TEXT, "how people call this network"),
        "currency": Field(Kind.TEXT, "ISO 4217, such as EUR", needed=True),
        "cut_off": Field(
            Kind.MOMENT, "when orders close, such as 2026-02-03T16:00:00+01:00", needed=True
        ),
        "planned_at": Field(Kind.MOMENT, "what closed before it is left out; cut_off if empty"),
        "release_by": Field(Kind.MOMENT, "when the plan is needed"),
        "periods": Field(Kind.LIST, "the dates on which goods may leave, with | between"),
        "shortage_measure": Field(
            Kind.TEXT, "adds up shortages of items in different units that share a limit"
        ),
        "extra": _EXTRA,
    },
    "items": {
        "id": Field(Kind.TEXT, _ID, needed=True),
        "unit": Field(Kind.TEXT, "what is counted, such as bag or KGM", needed=True),
        "name": Field(Kind.TEXT, "how people call it"),
        "step": Field(Kind.NUMBER, "the least quantity that ships; 1 if empty"),
        "gtin": Field(Kind.TEXT, "GTIN with its check digit"),
        "weight_kg": Field(Kind.NUMBER, "kilograms of one unit"),
        "volume_m3": Field(Kind.NUMBER, "cubic metres of one unit"),
        "value": Field(Kind.NUMBER, "what one unit is worth, in the currency of the plan"),
        "tags": Field(Kind.LIST, _TAGS),
        "extra": _EXTRA,
    },
    "packs": {
        "item": Field(Kind.TEXT, "the item that is packed", needed=True),
        "unit": Field(Kind.TEXT, "the pack, such as pallet", needed=True),
        "contains": Field(Kind.NUMBER, "how many item units it holds", needed=True),
    },
    "sites": {
        "id": Field(Kind.TEXT, _ID, needed=True),
        "roles": Field(
            Kind.LIST, "warehouse, cross_dock, ship_to; several with | between", needed=True
        ),
        "name": Field(Kind.TEXT, "how people call it"),
        "gln": Field(Kind.TEXT, "GLN with its check digit"),
        "latitude": Field(Kind.NUMBER, "degrees"),
        "longitude": Field(Kind.NUMBER, "degrees"),
        "time_zone": Field(Kind.TEXT, "such as Europe/Oslo"),
        "country": Field(Kind.TEXT, "ISO 3166, two letters"),
        "handling_cost": Field(Kind.NUMBER, "money per unit that passes, for every item"),
        "tags": Field(Kind.LIST, _TAGS),
        "extra": _EXTRA,
    },
    "supply": {
        "site": Field(Kind.TEXT, "where the stock is", needed=True),
        "item": Field(Kind.TEXT, "of what", needed=True),
        "quantity": Field(Kind.NUMBER, "how much is available", needed=True),
        "unit": Field(Kind.TEXT, "the item's unit if empty; a pack, or a unit of the same kind"),
        "unit_cost": Field(Kind.NUMBER, "money per unit that is drawn"),
        "currency": Field(Kind.TEXT, "of the unit cost, ISO 4217; the plan's if empty"),
        "on_hand": Field(Kind.NUMBER, "for the record: what lies there"),
        "reserved": Field(Kind.NUMBER, "for the record: what is promised"),
        "on_hold": Field(Kind.NUMBER, "for the record: what is blocked"),
        "as_of": Field(Kind.MOMENT, "when it was counted"),
        "lot": Field(Kind.TEXT, "the lot"),
        "best_before": Field(Kind.DATE, "a date"),
        "available_from": Field(Kind.DATE, "the first date on which it can be drawn; now if empty"),
        "keep.quantity": Field(Kind.NUMBER, "how much should stay; on one row of a site and item"),
        "keep.priority": Field(Kind.WHOLE, "1 to 9: how important it is that it stays"),
        "extra": _EXTRA,
    },
    "demand": {
        "reference": Field(Kind.TEXT, "the order line, once; # and the row number if empty"),
        "order": Field(Kind.TEXT, "the order it belongs to"),
        "ordered_at": Field(Kind.MOMENT, "when it was ordered"),
        "site": Field(Kind.TEXT, "where it is wanted", needed=True),
        "item": Field(Kind.TEXT, "of what", needed=True),
        "quantity": Field(Kind.NUMBER, "how much is wanted", needed=True),
        "unit": Field(Kind.TEXT, "the item's unit if empty; a pack, or a unit of the same kind"),
        "priority": Field(Kind.WHOLE, "1 (first) to 9"),
        "shortage_cost": Field(Kind.NUMBER, "money per unit short, instead of a priority"),
        "worth_at_most": Field(Kind.NUMBER, "serve only up to this money per unit"),
        "earliest": Field(Kind.DATE, "nothing may arrive before this date"),
        "due": Field(Kind.DATE, "the date it is wished for; each day later is late"),
        "latest": Field(Kind.DATE, "nothing may arrive after this date"),
        "late_cost_per_day": Field(Kind.NUMBER, "money per unit and day after due"),
        "origins": Field(Kind.LIST, "the sites whose stock may serve it, with | between"),
        "tags": Field(Kind.LIST, _TAGS),
        "extra": _EXTRA,
    },
    "lanes": {
        "id": Field(Kind.TEXT, "its id, if it has one"),
        "origin": Field(Kind.TEXT, "from which site", needed=True),
        "destination": Field(Kind.TEXT, "to which site", needed=True),
        "item": Field(Kind.TEXT, "of what; any item if empty"),
        "unit_cost": Field(Kind.NUMBER, "money per unit of the measure; or else a tariff"),
        "measure": Field(Kind.TEXT, "unit if empty; weight_kg, volume_m3, or a pack"),
        "must_ship": Field(Kind.NUMBER, "at least so much goes"),
        "capacity": Field(Kind.NUMBER, "at most so much goes; no limit if empty"),
        "per": Field(Kind.TEXT, "item: the limits hold for each item by itself; together: for all"),
        "carrier": Field(Kind.TEXT, "who drives"),
        "currency": Field(Kind.TEXT, "of the unit cost, ISO 4217; the plan's if empty"),
        "charges": Field(
            Kind.OBJECTS,
            'duty and the like as JSON: [{"name": "duty", "basis": "value", "percent": "2.5"}]',
        ),
        "tariff": Field(Kind.TEXT, "a freight tariff by id, instead of unit_cost"),
        "transit_days": Field(Kind.WHOLE, "calendar days from departure to arrival; 0 if empty"),
        "closes": Field(Kind.MOMENT, "when a departure closes"),
        "departs": Field(Kind.MOMENT, "when a departure leaves its origin"),
        "arrives": Field(Kind.MOMENT, "when it arrives, instead of transit_days"),
        "tags": Field(Kind.LIST, _TAGS),
        "extra": _EXTRA,
    },
    "rules": {
        "rule": Field(
            Kind.TEXT, "closure, fixed_quantity, throughput, shared_capacity", needed=True
        ),
        "id": Field(Kind.TEXT, _ID, needed=True),
        "note": Field(Kind.TEXT, "why"),
        "owner": Field(Kind.TEXT, "whose rule it is"),
        "from": Field(Kind.DATE, "its first day"),
        "until": Field(Kind.DATE, "its last day"),
        "lanes": Field(Kind.TEXT, "all: it picks every lane"),
        "lanes.ids": Field(Kind.LIST, "lanes by id, with | between"),
        "lanes.origin": Field(Kind.LIST, "lanes by origin"),
        "lanes.destination": Field(Kind.LIST, "lanes by destination"),
        "lanes.carrier": Field(Kind.LIST, "lanes by carrier"),
        "lanes.tag": Field(Kind.LIST, "lanes by tag"),
        "sites": Field(Kind.TEXT, "all: it picks every site"),
        "sites.ids": Field(Kind.LIST, "sites by id, with | between"),
        "sites.role": Field(Kind.LIST, "sites by role"),
        "sites.tag": Field(Kind.LIST, "sites by tag"),
        "items": Field(Kind.TEXT, "all: it picks every item"),
        "items.ids": Field(Kind.LIST, "items by id, with | between"),
        "items.tag": Field(Kind.LIST, "items by tag"),
        "flow": Field(Kind.TEXT, "throughput: received, sent or through"),
        "measure": Field(Kind.TEXT, "throughput, shared_capacity: unit if empty"),
        "maximum": Field(Kind.NUMBER, "throughput, shared_capacity: at most so much"),
        "quantity": Field(Kind.NUMBER, "fixed_quantity: exactly so much"),
        "per": Field(Kind.TEXT, "each site or lane by itself, or all together"),
    },
    "exchange_rates": {
        "currency": Field(Kind.TEXT, "ISO 4217, such as NOK", needed=True),
        "rate": Field(Kind.NUMBER, "what it is in the currency of the plan", needed=True),
        "per": Field(Kind.NUMBER, "for so many units of it; 1 if empty"),
        "as_of": Field(Kind.DATE, "the day of the rate"),
        "source": Field(Kind.TEXT, "who says so"),
    },
    "tariffs": {
        "id": Field(Kind.TEXT, _ID, needed=True),
        "carrier": Field(Kind.TEXT, "whose tariff it is"),
        "currency": Field(Kind.TEXT, "ISO 4217; the plan's if empty"),
        "valid_from": Field(Kind.DATE, "the first day of departure"),
        "valid_until": Field(Kind.DATE, "the last day of departure"),
        "version": Field(Kind.TEXT, "its version"),
        "source": Field(Kind.TEXT, "where it stands"),
        "basis": Field(
            Kind.TEXT, "unit, weight, volume, chargeable_weight, or a pack", needed=True
        ),
        "kg_per_m3": Field(Kind.NUMBER, "chargeable_weight: what a cubic metre counts as"),
        "breaks": Field(
            Kind.OBJECTS,
            'rates by quantity as JSON: [{"from": "0", "rate": "5"}, {"from": "100", "rate": "6"}]',
            needed=True,
        ),
        "break_type": Field(Kind.TEXT, "incremental or all_units, where there are several breaks"),
        "pay_up": Field(Kind.FLAG, "all_units: true where a cheaper break may be paid in full"),
        "minimum_charge": Field(Kind.NUMBER, "money that is due at least"),
        "surcharge_percent": Field(Kind.NUMBER, "percent on top"),
        "round_up_to": Field(Kind.NUMBER, "what is charged is a multiple of this"),
        "round_money": Field(Kind.NUMBER, "the freight is rounded to a multiple of this"),
    },
    "storage": {
        "site": Field(Kind.TEXT, "a cross-dock where goods may stay overnight", needed=True),
        "item": Field(Kind.TEXT, "goods of this item; of all if empty"),
    },
    "control": {
        "demand_rows": Field(Kind.WHOLE, "how many order lines there must be"),
        "demand_quantity": Field(Kind.NUMBER, "the sum of their quantities as written"),
        "supply_rows": Field(Kind.WHOLE, "how many supply rows there must be"),
        "supply_quantity": Field(Kind.NUMBER, "the sum of their quantities as written"),
        "lane_rows": Field(Kind.WHOLE, "how many lanes there must be"),
        "extract_id": Field(Kind.TEXT, "the id of the extract"),
        "extracted_at": Field(Kind.MOMENT, "when it was made"),
    },
}
# Tables of one row, which may also be written as two columns, field and value.
SINGLE: Final = frozenset({"network", "control", "dialect"})
PAIR_COLUMNS: Final = ("field", "value")
WANTED: Final = ("network", "items", "sites", "supply", "demand", "lanes")
# How the CSV files beside it are written, where that cannot be told for certain.
DIALECT: Final[Mapping[str, Field]] = {
    "encoding": Field(Kind.TEXT, "utf-8, latin-1 or windows-1252"),
    "decimal_mark": Field(Kind.TEXT, "point or comma"),
}


def field_of(table: str, column: str) -> Field | None:
    """Return what a column of a table is, None if the table has no such column."""
    known = DIALECT if table == "dialect" else TABLES[table]
    found = known.get(column)
    if found is not None:
        return found
    family, point, name = column.partition(".")
    return FAMILIES[family] if point and name and family in FAMILIES and family in known else None
