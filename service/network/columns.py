"""The network as the rest of the house sees it: few things as objects, many things as columns.

A ``Network`` is already checked (``network/intake.py``) and in normal form: items and sites are
sorted by id, the tables by their key, so that the position of a thing never depends on the order
in which it was sent. Everything numeric is exact: integers with one decimal exponent a column.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field, fields, replace
from fractions import Fraction
from typing import Any, TypeVar

import numpy as np
from numpy.typing import NDArray

IntArray = NDArray[np.int64]
CodeArray = NDArray[np.int32]
BoolArray = NDArray[np.bool_]
IdArray = NDArray[np.bytes_]


@dataclass(frozen=True, slots=True, kw_only=True)
class Decimals:
    """A column of exact decimals: the value of row r is ``values[r] / 10**exponent``.

    ``values`` int64 of shape (rows,), each below 2**62 in size and 0 where absent; ``present`` bool
    of shape (rows,). ``exponent`` is the least one that makes every present value whole.
    """

    values: IntArray
    present: BoolArray
    exponent: int

    def fraction(self, row: int) -> Fraction | None:
        """Return the value of ``row``, or None where nothing was given."""
        if not self.present[row]:
            return None
        return Fraction(int(self.values[row]), 10**self.exponent)


@dataclass(frozen=True, slots=True, kw_only=True)
class Texts:
    """A column of text from few distinct values.

    ``codes`` int32 of shape (rows,): a position in ``values``, or -1 where nothing was given.
    ``values`` are distinct, sorted by code point, and each is used at least once.
    """

    codes: CodeArray
    values: tuple[str, ...]

    def text(self, row: int) -> str | None:
        """Return the text of ``row``, or None where nothing was given."""
        code = int(self.codes[row])
        return None if code < 0 else self.values[code]


@dataclass(frozen=True, slots=True, kw_only=True)
class Pack:
    """A trade pack of an item, such as a pallet of 40 bags: ``contains`` in item units, above 0."""

    unit: str
    contains: Fraction


@dataclass(frozen=True, slots=True, kw_only=True)
class Item:
    """What is moved. ``step`` is the least quantity that ships, in item units, above 0.

    ``value`` is what one unit is worth, in the currency of the plan.
    """

    id: str
    unit: str
    step: Fraction
    name: str | None
    gtin: str | None
    weight_kg: Fraction | None
    volume_m3: Fraction | None
    packs: tuple[Pack, ...]
    tags: tuple[str, ...]
    extra: Mapping[str, str]
    value: Fraction | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Site:
    """A place with roles. ``handling_cost`` is money per item unit that passes, by item id.

    ``handling_cost_any`` is that of every item without an entry of its own; absent means 0.
    """

    id: str
    roles: frozenset[str]
    name: str | None
    gln: str | None
    latitude: Fraction | None
    longitude: Fraction | None
    time_zone: str | None
    country: str | None
    handling_cost_any: Fraction | None
    handling_cost: Mapping[str, Fraction]
    tags: tuple[str, ...]
    extra: Mapping[str, str]

    def handling(self, item: str) -> Fraction:
        """Return the money that one unit of ``item`` costs when it passes this site."""
        own = self.handling_cost.get(item)
        if own is not None:
            return own
        return Fraction(0) if self.handling_cost_any is None else self.handling_cost_any


# The fields of a site that says no more than its id and its roles, as most of many sites do.
NOTHING_MORE: Mapping[str, Any] = {
    **dict.fromkeys(("name", "gln", "latitude", "longitude", "time_zone", "country")),
    "handling_cost_any": None,
    "handling_cost": {},
    "tags": (),
    "extra": {},
}


@dataclass(frozen=True, slots=True, kw_only=True)
class LaneTable:
    """Lanes, one row each, sorted by (origin, destination, item, id, rank among the unnamed).

    ``ids`` holds UTF-8, ``b""`` where the lane is named after its ends (``network/naming.py``);
    ``origin`` and ``destination`` are positions in ``Network.sites``; ``item`` one in
    ``Network.items``, or -1 for a lane that carries any item. ``unit_cost`` is money per unit of
    ``measure``; ``must_ship`` and ``capacity`` are in ``measure`` too (absent: 0, unlimited).
    ``measure`` is ``unit``, ``weight_kg``, ``volume_m3`` or the unit of a pack, never absent.
    ``per`` is ``item``, ``together`` (the limits are for all items) or absent. ``currency`` is that
    of ``unit_cost`` (absent: the plan's); ``charges`` holds JSON arrays of charges in normal form
    (``network/money.py``), ``tags`` JSON arrays of sorted tags, ``extra`` JSON objects.
    ``transit_days`` are whole days. ``closes``, ``departs`` and ``arrives`` are RFC 3339 in the
    time zone of the site where they happen, so that the first ten characters are its date.
    ``tariff`` is the id of a tariff of the head, and absent exactly where ``unit_cost`` is there.
    """

    ids: IdArray
    origin: CodeArray
    destination: CodeArray
    item: CodeArray
    unit_cost: Decimals
    measure: Texts
    must_ship: Decimals
    capacity: Decimals
    per: Texts
    carrier: Texts
    currency: Texts
    charges: Texts
    tariff: Texts
    transit_days: Decimals
    closes: Texts
    departs: Texts
    arrives: Texts
    tags: Texts
    extra: Texts

    def __len__(self) -> int:
        """Return the number of lanes."""
        return int(self.origin.shape[0])


@dataclass(frozen=True, slots=True, kw_only=True)
class SupplyTable:
    """Stock, one row each; the order is (site, item, available_from, cost, best_before, lot, rest).

    The cost is the unit cost per item unit; a row without a date (available now) comes first.

    ``quantity``, ``on_hand``, ``reserved``, ``on_hold`` and ``keep_quantity`` are in the row's
    ``unit``, ``unit_cost`` is money per ``unit`` (absent: 0) in ``currency`` (absent: the plan's);
    ``unit`` is never absent. ``as_of`` is RFC 3339 in UTC with ``Z``, ``best_before`` and
    ``available_from`` are dates.
    ``keep_priority`` is 0 where no stock is kept.
    """

    site: CodeArray
    item: CodeArray
    quantity: Decimals
    unit: Texts
    unit_cost: Decimals
    currency: Texts
    on_hand: Decimals
    reserved: Decimals
    on_hold: Decimals
    as_of: Texts
    lot: Texts
    best_before: Texts
    available_from: Texts
    keep_quantity: Decimals
    keep_priority: CodeArray
    extra: Texts

    def __len__(self) -> int:
        """Return the number of supply rows."""
        return int(self.site.shape[0])


@dataclass(frozen=True, slots=True, kw_only=True)
class DemandTable:
    """Order lines, one row each, sorted by reference (which is unique, in UTF-8).

    ``quantity`` is in the row's ``unit``; ``shortage_cost`` and ``worth_at_most`` are money per
    ``unit``. ``priority`` is 0 where the row names none (then option and default decide).
    ``origins`` holds JSON arrays of sorted site ids, absent where every origin may serve the line.
    ``earliest``, ``due`` and ``latest`` are dates; ``late_cost_per_day`` is money per ``unit`` and
    day after ``due``.
    """

    reference: IdArray
    order: Texts
    ordered_at: Texts
    site: CodeArray
    item: CodeArray
    quantity: Decimals
    unit: Texts
    priority: CodeArray
    shortage_cost: Decimals
    worth_at_most: Decimals
    earliest: Texts
    due: Texts
    latest: Texts
    late_cost_per_day: Decimals
    origins: Texts
    tags: Texts
    extra: Texts

    def __len__(self) -> int:
        """Return the number of order lines."""
        return int(self.site.shape[0])


_Table = TypeVar("_Table", SupplyTable, DemandTable, LaneTable)


def rows_at(table: _Table, rows: IntArray) -> _Table:
    """Return the rows of ``table`` at positions ``rows``, some perhaps several times.

    Columns of texts keep all their values. For columns in their one spelling see ``rows_of`` in
    ``table_rows.py``.
    """
    columns: dict[str, object] = {}
    for one in fields(table):
        column = getattr(table, one.name)
        if isinstance(column, Texts):
            columns[one.name] = replace(column, codes=column.codes[rows])
        elif isinstance(column, Decimals):
            columns[one.name] = replace(
                column, values=column.values[rows], present=column.present[rows]
            )
        else:
            columns[one.name] = column[rows]
    return replace(table, **columns)  # type: ignore[arg-type] # each of its field's own type


@dataclass(frozen=True, slots=True, kw_only=True)
class Network:
    """A checked network in normal form.

    ``head`` holds what is neither a table, an item nor a site, as plain JSON values with every
    decimal a shortest decimal string: ``format``, ``name``, ``currency``, ``cut_off``,
    ``planned_at``, ``release_by``, ``shortage_measure``, ``periods`` (sorted dates), ``rules``
    (sorted by id, see ``network/rules.py``), ``exchange_rates`` (sorted by currency, see
    ``network/money.py``), ``tariffs`` (see ``network/tariffs.py``) and ``extra``.

    ``known_digest`` is the digest of the bytes that this very object was read from, else None; it
    does not pass on to a network that ``dataclasses.replace`` makes of it.
    """

    head: Mapping[str, object]
    items: tuple[Item, ...]
    sites: tuple[Site, ...]
    supply: SupplyTable
    demand: DemandTable
    lanes: LaneTable
    known_digest: str | None = field(init=False, default=None, repr=False, compare=False)
