"""Checks of dates: of lanes and order lines by themselves, and against the days of the network."""

from datetime import date
from typing import TYPE_CHECKING

import numpy as np

from service.network.assembly import Assembly
from service.network.columns import IntArray
from service.network.days import (
    LAST_YEAR,
    TRANSIT_DAYS_MAX,
    Movements,
    cut_off_day,
    days_of,
    gone_lanes,
    is_dated,
    leaving_days,
    moments_of,
    movements_of,
)
from service.network.faults import FaultList, pointer
from service.network.not_yet import SHARED, refusal
from service.network.rules import FixedQuantity, in_force, lanes_selected
from service.network.tables import ReadDemand, ReadLanes

if TYPE_CHECKING:
    from service.network.table_faults import TableFaults

# Above every day and every instant that can be written.
_NEVER = np.iinfo(np.int64).max
# So many movements are more than the same number of lanes could have been sent as.
MOVEMENTS_MAX = 2**26


def check_lane_dates(read: ReadLanes) -> None:
    """Find lanes whose times contradict each other."""
    lanes, faults = read.table, read.faults
    moments = (lanes.departs, lanes.arrives, lanes.closes)
    if not (any(column.values for column in moments) or lanes.transit_days.present.any()):
        return
    departs, arrives, closes = (moments_of(column, absent=_NEVER) for column in moments)
    lone = (lanes.departs.codes < 0) & ~faults.faulty("departs")
    detail = "Say departs beside it: a departure has all three times or the first of them."
    for name, column in (("arrives", lanes.arrives), ("closes", lanes.closes)):
        rows = np.flatnonzero(lone & (column.codes >= 0))
        faults.at_rows(name, rows, "departs_missing", detail)
    known = lanes.departs.codes >= 0
    early = np.flatnonzero(known & (lanes.arrives.codes >= 0) & (arrives < departs))
    faults.at_rows("arrives", early, "arrives_before_departs", "It arrives before it departs.")
    late = np.flatnonzero(known & (lanes.closes.codes >= 0) & (closes > departs))
    faults.at_rows("closes", late, "closes_after_departs", "It closes after it departs.")
    both = np.flatnonzero(lanes.transit_days.present & (lanes.arrives.codes >= 0))
    detail = "Say transit_days or arrives: both say when goods arrive."
    faults.at_rows("transit_days", both, "two_arrivals", detail)
    long = np.flatnonzero(lanes.transit_days.values > TRANSIT_DAYS_MAX)
    detail = f"At most {TRANSIT_DAYS_MAX} days."
    faults.at_rows("transit_days", long, "transit_too_long", detail)


def check_demand_dates(read: ReadDemand, cut_off: int | None) -> None:
    """Find order lines whose dates contradict each other or the day of the cut-off."""
    demand, faults = read.table, read.faults
    latest = days_of(demand.latest, absent=_NEVER)
    reversed_ = np.flatnonzero(days_of(demand.earliest, absent=0) > latest)
    detail = "The window ends (latest) before it begins (earliest)."
    faults.at_rows("latest", reversed_, "window_reversed", detail)
    if cut_off is not None:
        past = np.flatnonzero(latest < cut_off)
        detail = "The line had to be there (latest) before the date of the cut-off."
        faults.at_rows("latest", past, "latest_before_cut_off", detail)
    alone = demand.late_cost_per_day.present & (demand.due.codes < 0) & ~faults.faulty("due")
    detail = "Say due beside it: nothing is late that has no date."
    faults.at_rows("late_cost_per_day", np.flatnonzero(alone), "due_missing", detail)


def check_days(assembly: Assembly, faults: FaultList) -> None:
    """Find what the days of the whole network contradict, and what they make doubtful."""
    network = assembly.network
    if not is_dated(network):
        return
    stated = [str(network.head["cut_off"]), *network.head.get("periods", ())]  # type: ignore[misc] # texts
    if any(text[:4] > LAST_YEAR for text in stated):
        faults.add("/cut_off", "beyond_calendar", f"Nothing is planned after the year {LAST_YEAR}.")
        return
    if "periods" in network.head and not leaving_days(network.head):
        detail = "All periods lie before the date of the cut-off. Send the days that are planned."
        faults.add("/periods", "periods_over", detail)
        return
    movements = movements_of(network)
    if len(movements.row) > MOVEMENTS_MAX:
        detail = f"Lanes and days of departure make {len(movements.row)} movements. Plan less days."
        faults.add("/periods" if "periods" in network.head else "/lanes", "too_many_days", detail)
        return
    if movements.arrives.max(initial=0) > date.max.toordinal():
        faults.add("/cut_off", "beyond_calendar", "Goods would arrive after the year 9999.")
        return
    _check_forced(assembly, movements, faults)
    _doubt_dates(assembly, movements, faults)


def _check_forced(assembly: Assembly, movements: Movements, faults: FaultList) -> None:
    """Refuse what must move on lanes that can leave on several days: days would share it."""
    network = assembly.network
    unlike = movements.not_one
    if not unlike.any():
        return
    sent = assembly.sent.lanes.faults
    rows = np.sort(assembly.lane_rows[np.flatnonzero(unlike & network.lanes.must_ship.present)])
    what = "must_ship on a lane that can leave on several days"
    sent.at_rows("must_ship", rows, "not_yet", refusal(what, SHARED))
    cut_off = str(network.head["cut_off"])
    for sent_rule in assembly.rules:
        rule = sent_rule.rule
        if not isinstance(rule, FixedQuantity) or not in_force(rule, cut_off):
            continue
        if (lanes_selected(network, rule) & unlike).any():
            what = "a fixed quantity on a lane that can leave on several days"
            place = pointer("rules", sent_rule.place, "lanes")
            faults.add(place, "not_yet", refusal(what, SHARED), rule.id)


def _doubt_dates(assembly: Assembly, movements: Movements, faults: FaultList) -> None:
    """Say which departures are gone, which wishes are past, and which stock comes too late."""
    network = assembly.network
    lanes, demand, supply = assembly.sent.lanes, assembly.sent.demand, assembly.sent.supply
    gone = np.flatnonzero(gone_lanes(network))
    detail = "The departure closed before the plan is made (planned_at): it is left out."
    _caution(
        faults, lanes.faults, ("departure_closed", detail), "departs", assembly.lane_rows[gone]
    )
    first = cut_off_day(network.head)
    overdue = np.flatnonzero(days_of(network.demand.due, absent=first) < first)
    detail = "The line was wished for (due) before the date of the cut-off: it is late already."
    _caution(faults, demand.faults, ("due_overdue", detail), "due", assembly.demand_rows[overdue])
    late = _supply_too_late(assembly, movements)
    detail = (
        "Goods leave this site for the last time before this stock is available, and nobody there "
        "wants it: it is left out."
    )
    _caution(
        faults,
        supply.faults,
        ("supply_too_late", detail),
        "available_from",
        assembly.supply_rows[late],
    )


def _supply_too_late(assembly: Assembly, movements: Movements) -> IntArray:
    """Return supply rows that no movement from their site can take any more."""
    network = assembly.network
    supply, demand = network.supply, network.demand
    if not supply.available_from.values:
        return np.zeros(0, dtype=np.int64)
    last = np.full(len(network.sites), -1, dtype=np.int64)
    np.maximum.at(last, network.lanes.origin[movements.row], movements.departs)
    wanted = set(zip(demand.site.tolist(), demand.item.tolist(), strict=True))
    from_day = days_of(supply.available_from, absent=-1)
    late = np.flatnonzero((from_day >= 0) & (from_day > last[supply.site]))
    kept = [
        row for row in late.tolist() if (int(supply.site[row]), int(supply.item[row])) not in wanted
    ]
    return np.array(kept, dtype=np.int64)


def _caution(
    faults: FaultList, sheet: "TableFaults", words: tuple[str, str], name: str, rows: IntArray
) -> None:
    """Give one warning about some rows as sent."""
    code, detail = words
    shown = np.sort(rows)[:3].tolist()
    examples = [(sheet.place(name, row), sheet.value(name, row)) for row in shown]
    faults.caution(code, detail, examples, len(rows))
