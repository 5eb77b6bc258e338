"""A network definition, already parsed, turned into a checked network or into all its faults."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Final

from service.network.assembly import Assembly, assemble
from service.network.charge_checks import check_charges
from service.network.columns import Network
from service.network.control import check_control
from service.network.currency_reading import Currencies, read_exchange_rates
from service.network.date_checks import check_days, check_demand_dates, check_lane_dates
from service.network.days import day_number
from service.network.definition import Control, Head, validated
from service.network.doubts import doubt
from service.network.faults import FaultList, pointer
from service.network.lane_use_checks import (
    check_lanes_for_any_item,
    check_loops,
    check_names,
    check_origins,
)
from service.network.moments import Instant
from service.network.options import Options
from service.network.reach import LaneUse
from service.network.row_checks import check_demand, check_lanes, check_supply
from service.network.rule_checks import check_rules
from service.network.rule_reading import read_rules
from service.network.sharing import Sharing
from service.network.sheets import Sheet, refuse_field
from service.network.stock_age import check_stock_age
from service.network.storage_reading import read_storage
from service.network.table_fields import LISTED_FIELDS, TABLE_FIELDS
from service.network.table_forms import sheet_of
from service.network.tables import ReadTables, read_demand, read_lanes, read_supply
from service.network.tariff_checks import check_tariffs
from service.network.tariff_reading import SentTariffs, read_tariffs
from service.network.things import read_things

LISTS: Final = ("items", "sites", "supply", "demand", "lanes")
PARTS: Final = (*LISTS, "rules", "control", "exchange_rates", "tariffs")


@dataclass(frozen=True, slots=True, kw_only=True)
class Reading:
    """What a definition was: ``network`` is None if there are faults.

    ``set_aside`` lists order lines that were left out, each with its place and its faults.
    """

    network: Network | None
    cut_off: Instant | None
    faults: FaultList
    set_aside: list[dict[str, object]] = field(default_factory=list)
    counts: Mapping[str, int] = field(default_factory=dict)


def read_network(document: object, options: Options, faults: FaultList | None = None) -> Reading:
    """Read and check a definition; every fault is found, whatever else is wrong.

    The rows of the three tables are taken out of ``document`` as soon as they are in columns; a
    table that came from a file is a ``Sheet`` already. ``faults`` are those found on the way here.
    """
    faults = FaultList() if faults is None else faults
    if not isinstance(document, dict):
        faults.add("", "wrong_type", "Send a network definition: a JSON object.", document)
        return Reading(network=None, cut_off=None, faults=faults)
    head = _read_head(document, faults)
    rules = read_rules(document.get("rules"), faults)
    own = None if head is None else head.currency
    currencies = read_exchange_rates(document.get("exchange_rates"), own, faults)
    tariffs = read_tariffs(document.get("tariffs"), currencies, faults)
    control = _read_control(document.get("control"), faults)
    things = read_things(document.get("items"), document.get("sites"), faults)
    sheets = _take_sheets(document, faults)
    if things is None or sheets is None:
        return Reading(network=None, cut_off=None, faults=faults)
    tables = ReadTables(
        supply=read_supply(sheets["supply"], things, currencies),
        demand=read_demand(sheets["demand"], things),
        lanes=read_lanes(sheets["lanes"], things, currencies, tariffs),
    )
    if control is not None:
        check_control(control, tables, faults)
    check_supply(tables.supply, things)
    check_demand(tables.demand, things, options)
    check_lanes(tables.lanes, things)
    check_lane_dates(tables.lanes)
    check_demand_dates(tables.demand, None if head is None else day_number(head.cut_off.local))
    set_aside = _refuse_or_set_aside(tables, options, faults)
    if head is not None:
        _doubt_head(head, faults)
        normal = _head_document(head, currencies, tariffs)
        if head.storage:
            normal["storage"] = read_storage(head.storage, things, faults)
        assembly = assemble(normal, things, tables, rules)
        _check_together(assembly, head.cut_off, options, faults, unsure=tariffs.unsure)
    else:
        assembly = None
    tables.supply.faults.refuse(faults)
    tables.lanes.faults.refuse(faults)
    if assembly is None or head is None or faults.count:
        return Reading(network=None, cut_off=None, faults=faults)
    return Reading(
        network=assembly.network,
        cut_off=head.cut_off,
        faults=faults,
        set_aside=set_aside,
        counts={
            "items": len(things.items),
            "sites": len(things.sites),
            "supply_rows": len(assembly.network.supply),
            "demand_rows": len(assembly.network.demand),
            "lanes": len(assembly.network.lanes),
        },
    )


def _read_head(document: Mapping[str, object], faults: FaultList) -> Head | None:
    """Read what a network says of itself, and see that no part is missing."""
    head: dict[str, object] = {}
    for name, value in document.items():
        if name in Head.model_fields:
            head[name] = value
        elif name not in PARTS:
            refuse_field("network", name, pointer(name), faults)
    for name in LISTS:
        if name not in document:
            detail = f"A network needs {name}; send an empty array if there are none."
            faults.add(pointer(name), "missing_field", detail)
    return validated(Head, head, path=(), table="network", faults=faults)


def _head_document(head: Head, currencies: Currencies, tariffs: SentTariffs) -> dict[str, object]:
    """Return the head in its normal form."""
    document: dict[str, object | None] = {
        "format": head.format,
        "name": head.name,
        "currency": head.currency,
        "cut_off": head.cut_off.local,
        "planned_at": None if head.planned_at is None else head.planned_at.local,
        "release_by": None if head.release_by is None else head.release_by.local,
        "periods": [day.isoformat() for day in head.periods] if head.periods else None,
        "shortage_measure": head.shortage_measure,
        "extra": dict(sorted(head.extra.items())) if head.extra else None,
        "exchange_rates": [dict(rate) for rate in currencies.documents] or None,
        "tariffs": [dict(tariff) for tariff in tariffs.documents] or None,
    }
    return {name: value for name, value in document.items() if value is not None}


def _doubt_head(head: Head, faults: FaultList) -> None:
    """Doubt a plan that is needed before its orders close."""
    planned = head.planned_at
    if planned is not None and planned.nanoseconds > head.cut_off.nanoseconds:
        detail = "The plan is made (planned_at) after its orders closed (cut_off)."
        faults.caution("planned_after_cut_off", detail, [("/planned_at", planned.local)])
    release = head.release_by
    if release is not None and release.nanoseconds < head.cut_off.nanoseconds:
        detail = "The plan is needed (release_by) before its orders close (cut_off)."
        faults.caution("release_before_cut_off", detail, [("/release_by", release.local)])


def _read_control(value: object, faults: FaultList) -> Control | None:
    """Read the control totals."""
    if value is None:
        return None
    return validated(Control, value, path=("control",), table="control", faults=faults)


def _take_sheets(document: dict[str, object], faults: FaultList) -> dict[str, Sheet] | None:
    """Return the three tables as columns of values, taking their rows out of ``document``.

    What stays there is only the order of names, by which faults are sorted.
    """
    sheets: dict[str, Sheet] = {}
    for name, fields in TABLE_FIELDS.items():
        if name not in document:
            continue
        value = document[name]
        if isinstance(value, Sheet):
            sheets[name] = value
            document[name] = None
            continue
        sheet = sheet_of(name, value, fields=tuple(fields), listed=LISTED_FIELDS, faults=faults)
        if sheet is not None:
            sheets[name] = sheet
        document[name] = dict.fromkeys(value) if isinstance(value, dict) else None
    return sheets if len(sheets) == len(TABLE_FIELDS) else None


def _refuse_or_set_aside(
    tables: ReadTables, options: Options, faults: FaultList
) -> list[dict[str, object]]:
    """Report faulty order lines, or return them as set aside; their rows are bad either way."""
    lines = tables.demand.faults
    if options.bad_rows == "refuse" or lines.whole_column_missing():
        lines.refuse(faults)
        return []
    references = tables.demand.table.reference
    return [
        {
            "pointer": lines.sheet.row_place(row),
            "reference": references[row].decode(),
            "errors": [fault.to_document() for fault in found],
        }
        for row, found in lines.by_row().items()
        if found
    ]


def _check_together(
    assembly: Assembly,
    cut_off: Instant,
    options: Options,
    faults: FaultList,
    *,
    unsure: frozenset[str],
) -> None:
    """Check what takes more than one table; ``unsure`` are the ids of tariffs that are refused.

    All that is wrong among the sound rows stays wrong with the others added, so that these checks
    need not wait until everything else is mended.
    """
    use = LaneUse(assembly.network)
    check_names(assembly)
    sharing = Sharing(assembly.network)
    check_lanes_for_any_item(assembly, use, sharing, faults)
    check_charges(assembly, use)
    check_tariffs(assembly, use, faults, unsure=unsure)
    check_loops(assembly, use, faults)
    check_origins(assembly, use, faults)
    check_rules(assembly, use, sharing, faults)
    sharing.check(faults)
    check_days(assembly, faults)
    check_stock_age(assembly, cut_off, options.maximum_age_minutes, faults)
    doubt(assembly, use, faults)
