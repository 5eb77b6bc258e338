"""Supply, demand and lanes read from the definition straight into columns.

Each reader returns all rows as sent, faulty ones included (their codes are below 0, their numbers
absent), with a ``TableFaults`` that says which rows those are. Single cells and repeated ids are
checked here; cells of a row against each other, and rows beside others, in ``row_checks.py`` and,
for what lanes are used for and called, ``lane_use_checks.py``.
"""

from dataclasses import dataclass, replace

import numpy as np

from service.network.charge_reading import charge_speller
from service.network.column_making import all_different, no_decimals, without
from service.network.columns import (
    BoolArray,
    CodeArray,
    Decimals,
    DemandTable,
    IdArray,
    LaneTable,
    SupplyTable,
)
from service.network.currency_reading import Currencies
from service.network.days import LAST_YEAR
from service.network.moments import read_date, read_instant
from service.network.quantities import QUANTITY_DECIMALS_MAX, RATE_DECIMALS_MAX
from service.network.sheets import Sheet, column_of_cells
from service.network.table_faults import TableFaults
from service.network.table_fields import PRIORITY_DEFAULT, PRIORITY_MAX
from service.network.table_reading import Spelled, TableReader
from service.network.table_rows import with_measure, with_units
from service.network.tariff_reading import SentTariffs
from service.network.things import Things
from service.network.time_zones import at_sites
from service.network.wording import ID_ADVICE, is_id

# Instants of these years are nanoseconds in 64 bits, and have a date in every time zone.
YEARS = (1971, int(LAST_YEAR))


@dataclass(frozen=True, slots=True, kw_only=True)
class ReadSupply:
    """Supply as sent, and what is wrong with it by itself."""

    table: SupplyTable
    faults: TableFaults


@dataclass(frozen=True, slots=True, kw_only=True)
class ReadDemand:
    """Order lines as sent, and what is wrong with them by themselves."""

    table: DemandTable
    faults: TableFaults


@dataclass(frozen=True, slots=True, kw_only=True)
class ReadLanes:
    """Lanes as sent, and what is wrong with them by themselves.

    ``table.ids`` holds the ids as given; ``measured`` tells which rows state their measure.
    """

    table: LaneTable
    faults: TableFaults
    measured: BoolArray


@dataclass(frozen=True, slots=True, kw_only=True)
class ReadTables:
    """The three tables as sent."""

    supply: ReadSupply
    demand: ReadDemand
    lanes: ReadLanes


def read_supply(sheet: Sheet, things: Things, currencies: Currencies) -> ReadSupply:
    """Read the supply table."""
    faults = TableFaults(sheet)
    reader = TableReader(faults)
    site = reader.codes("site", things.site_positions, unknown="unknown_site", thing="site")
    item = reader.codes("item", things.item_positions, unknown="unknown_item", thing="item")
    quantity = _quantity(reader, "quantity")
    keep_quantity, keep_priority = _keep(sheet, faults)
    table = SupplyTable(
        site=site,
        item=item,
        quantity=quantity,
        unit=with_units(reader.texts("unit", _id), item, things.items),
        unit_cost=reader.decimals("unit_cost", decimals_max=RATE_DECIMALS_MAX, least=None),
        currency=reader.texts("currency", currencies.spelled),
        on_hand=_quantity(reader, "on_hand"),
        reserved=_quantity(reader, "reserved"),
        on_hold=_quantity(reader, "on_hold"),
        as_of=reader.texts("as_of", _instant),
        lot=reader.texts("lot", _id),
        best_before=reader.texts("best_before", _date),
        available_from=reader.texts("available_from", _date),
        keep_quantity=keep_quantity,
        keep_priority=keep_priority,
        extra=reader.extras(),
    )
    _require(reader, site=site, item=item, quantity=quantity)
    return ReadSupply(table=table, faults=faults)


def read_demand(sheet: Sheet, things: Things) -> ReadDemand:
    """Read the order lines; a line without a reference is called ``#`` and its number as sent."""
    faults = TableFaults(sheet)
    reader = TableReader(faults)
    references = _numbered(reader.ids("reference"))
    _refuse_repeats(
        faults,
        "reference",
        references,
        "duplicate_reference",
        "Another order line has this reference. Give each line one of its own.",
    )
    site = reader.codes("site", things.site_positions, unknown="unknown_site", thing="site")
    item = reader.codes("item", things.item_positions, unknown="unknown_item", thing="item")
    quantity = _quantity(reader, "quantity")
    table = DemandTable(
        reference=references,
        order=reader.texts("order", _id),
        ordered_at=reader.texts("ordered_at", _instant),
        site=site,
        item=item,
        quantity=quantity,
        unit=with_units(reader.texts("unit", _id), item, things.items),
        priority=reader.small("priority", most=PRIORITY_MAX),
        shortage_cost=reader.decimals("shortage_cost", decimals_max=RATE_DECIMALS_MAX, least=0),
        worth_at_most=reader.decimals("worth_at_most", decimals_max=RATE_DECIMALS_MAX, least=0),
        earliest=reader.texts("earliest", _date),
        due=reader.texts("due", _date),
        latest=reader.texts("latest", _date),
        late_cost_per_day=reader.decimals(
            "late_cost_per_day", decimals_max=RATE_DECIMALS_MAX, least=0
        ),
        origins=reader.lists("origins", things.site_positions, empty=False),
        tags=reader.lists("tags", empty=True),
        extra=reader.extras(),
    )
    _require(reader, site=site, item=item, quantity=quantity)
    return ReadDemand(table=table, faults=faults)


def read_lanes(
    sheet: Sheet, things: Things, currencies: Currencies, tariffs: SentTariffs
) -> ReadLanes:
    """Read the lanes. A must-ship of 0 and the ``per`` of a lane with an item say nothing."""
    faults = TableFaults(sheet)
    reader = TableReader(faults)
    ids = reader.ids("id")
    _refuse_repeats(
        faults,
        "id",
        ids,
        "duplicate_id",
        "Another lane has this id. Give each lane one of its own, or none.",
    )
    origin = reader.codes("origin", things.site_positions, unknown="unknown_site", thing="site")
    destination = reader.codes(
        "destination", things.site_positions, unknown="unknown_site", thing="site"
    )
    item = reader.codes("item", things.item_positions, unknown="unknown_item", thing="item")
    unit_cost = reader.decimals("unit_cost", decimals_max=RATE_DECIMALS_MAX, least=None)
    must_ship = _quantity(reader, "must_ship")
    tariff = reader.texts("tariff", tariffs.spelled)
    measure = reader.texts("measure", _id)
    per = reader.texts("per", _per)
    table = LaneTable(
        ids=ids,
        origin=origin,
        destination=destination,
        item=item,
        unit_cost=unit_cost,
        measure=with_measure(measure),
        must_ship=without(must_ship, must_ship.present & (must_ship.values == 0)),
        capacity=_quantity(reader, "capacity"),
        per=replace(per, codes=np.where(item >= 0, np.int32(-1), per.codes)) if per.values else per,
        carrier=reader.texts("carrier", _id),
        currency=reader.texts("currency", currencies.spelled),
        charges=reader.structures("charges", charge_speller(things.item_positions, currencies)),
        tariff=tariff,
        transit_days=reader.decimals("transit_days", decimals_max=0, least=0),
        closes=at_sites(reader.texts("closes", _local), origin, things.sites),
        departs=at_sites(reader.texts("departs", _local), origin, things.sites),
        arrives=at_sites(reader.texts("arrives", _local), destination, things.sites),
        tags=reader.lists("tags", empty=True),
        extra=reader.extras(),
    )
    reader.require("origin", origin != -1)
    reader.require("destination", destination != -1)
    _require_one_cost(reader, faults, unit_cost.present, reader.given("tariff"))
    return ReadLanes(table=table, faults=faults, measured=measure.codes >= 0)


def _require_one_cost(
    reader: TableReader, faults: TableFaults, costs: BoolArray, by_tariff: BoolArray
) -> None:
    """Report lanes that have neither a cost nor a tariff, or both."""
    if not by_tariff.any():
        reader.require("unit_cost", costs)
        return
    neither = ~costs & ~by_tariff & ~faults.faulty("unit_cost")
    detail = "Every lane needs unit_cost, or a tariff."
    faults.at_rows("unit_cost", np.flatnonzero(neither), "missing_field", detail)
    detail = "A tariff stands instead of unit_cost. Drop one of them."
    faults.at_rows("tariff", np.flatnonzero(costs & by_tariff), "two_costs", detail)
    stated = reader.given("currency") & by_tariff
    detail = "A tariff has a currency of its own. Drop that of the lane."
    faults.at_rows("currency", np.flatnonzero(stated), "currency_of_tariff", detail)


def _quantity(reader: TableReader, name: str) -> Decimals:
    """Read a column of quantities, which are never negative."""
    return reader.decimals(name, decimals_max=QUANTITY_DECIMALS_MAX, least=0)


def _require(reader: TableReader, *, site: CodeArray, item: CodeArray, quantity: Decimals) -> None:
    """Report rows of supply or demand that lack what each of them needs."""
    reader.require("site", site != -1)
    reader.require("item", item != -1)
    reader.require("quantity", quantity.present)


def _numbered(references: IdArray) -> IdArray:
    """Return references; a line without one is called by its number."""
    missing = np.flatnonzero(references == b"")
    if len(missing) == 0:
        return references
    names = np.array([b"#%d" % (row + 1) for row in missing.tolist()])
    numbered = references.astype(max(references.dtype, names.dtype, key=lambda kind: kind.itemsize))
    numbered[missing] = names
    return numbered


def _refuse_repeats(faults: TableFaults, name: str, ids: IdArray, code: str, detail: str) -> None:
    """Report every row whose id another row has too: which of them is meant would be a guess."""
    given = np.flatnonzero(ids != b"")
    if all_different(ids[given]):
        return
    _, group, sizes = np.unique(ids[given], return_inverse=True, return_counts=True)
    faults.at_rows(name, given[sizes[group] > 1], code, detail)


def _id(text: str) -> Spelled:
    """Spell an id, a unit, a carrier or a lot: as it is."""
    return Spelled(text) if is_id(text) else Spelled(None, "bad_id", ID_ADVICE)


def _instant(text: str) -> Spelled:
    """Spell a point in time: in UTC."""
    try:
        return Spelled(read_instant(text).utc)
    except ValueError as error:
        return Spelled(None, "bad_time", str(error))


def _local(text: str) -> Spelled:
    """Spell a point in time: with the offset it was sent with."""
    try:
        instant = read_instant(text)
    except ValueError as error:
        return Spelled(None, "bad_time", str(error))
    if not YEARS[0] <= instant.local_date.year <= YEARS[1]:
        detail = f"No lane is planned with in that year. Say one from {YEARS[0]} to {YEARS[1]}."
        return Spelled(None, "bad_time", detail)
    return Spelled(instant.local)


def _date(text: str) -> Spelled:
    """Spell a calendar date."""
    try:
        return Spelled(read_date(text).isoformat())
    except ValueError as error:
        return Spelled(None, "bad_date", str(error))


def _per(text: str) -> Spelled:
    """Spell whom a limit of a lane for any item concerns."""
    if text not in {"item", "together"}:
        detail = "Say 'item' (the limits hold for each item by itself) or 'together' (for all)."
        return Spelled(None, "bad_choice", detail)
    return Spelled(text)


def _keep(sheet: Sheet, faults: TableFaults) -> tuple[Decimals, CodeArray]:
    """Read what stays in stock; a quantity of 0 says nothing and counts as absent."""
    column = sheet.columns.get("keep")
    if column is None:
        return no_decimals(sheet.rows), np.zeros(sheet.rows, dtype=np.int32)
    values = column.values
    wrong = [
        place
        for place, value in enumerate(values)
        if value is not None and not (isinstance(value, dict) and set(value) <= _KEEP_FIELDS)
    ]
    detail = "Send an object with quantity and, if you like, priority (1 to 9; default 5)."
    faults.at_values("keep", wrong, "bad_keep", detail)
    strange = set(wrong)
    parts = [
        value if isinstance(value, dict) and place not in strange else {}
        for place, value in enumerate(values)
    ]
    # The parts are read as a small table of their own, so that they get the same checks.
    inner = TableFaults(
        Sheet(
            name="keep",
            rows=len(parts),
            columns={
                name: column_of_cells(
                    [part.get(name) for part in parts],
                    place=lambda place, name=name: f"{column.place(place)}/{name}",  # type: ignore[misc] # bound now
                )
                for name in _KEEP_FIELDS
            },
            row_place=column.place,
        )
    )
    reader = TableReader(inner)
    quantity = _quantity(reader, "quantity")
    priority = reader.small("priority", most=PRIORITY_MAX)
    given = np.array(
        [value is not None and place not in strange for place, value in enumerate(values)],
        dtype=np.bool_,
    )
    reader.require("quantity", quantity.present | ~given)
    faults.adopt("keep", inner)
    kept = quantity.values > 0
    priority = np.where(kept & (priority == 0), np.int32(PRIORITY_DEFAULT), priority)
    priority = np.where(kept, priority, np.int32(0))
    return without(quantity, ~kept), priority


_KEEP_FIELDS = frozenset({"quantity", "priority"})
