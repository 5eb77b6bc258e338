"""Control totals: what the sender counted must be what arrived, rows set aside included."""

from dataclasses import dataclass
from fractions import Fraction

from service.network.columns import DemandTable, SupplyTable
from service.network.definition import Control
from service.network.faults import FaultList, pointer
from service.network.quantities import exact_sum, exact_text
from service.network.table_faults import TableFaults
from service.network.tables import ReadTables


@dataclass(frozen=True, slots=True, kw_only=True)
class Counted:
    """What arrived of one table: rows, the sum of quantities, and whether all could be read."""

    rows: int
    quantity: Fraction
    all_read: bool


def check_control(control: Control, tables: ReadTables, faults: FaultList) -> None:
    """Compare the totals that the sender stated with the tables as sent."""
    supply = _counted(tables.supply.table, tables.supply.faults)
    demand = _counted(tables.demand.table, tables.demand.faults)
    rows = {
        "demand_rows": (control.demand_rows, demand.rows),
        "supply_rows": (control.supply_rows, supply.rows),
        "lane_rows": (control.lane_rows, tables.lanes.faults.sheet.rows),
    }
    for name, (stated, counted) in rows.items():
        if stated is not None and stated != counted:
            detail = f"Stated {stated}, arrived {counted}. Rows were lost or added on the way."
            faults.add(pointer("control", name), "control_mismatch", detail, stated)
    sums = {
        "demand_quantity": (control.demand_quantity, demand),
        "supply_quantity": (control.supply_quantity, supply),
    }
    for name, (total, found) in sums.items():
        if total is None or (found.all_read and total == found.quantity):
            continue
        stated_text, sum_text = exact_text(total), exact_text(found.quantity)
        detail = f"Stated {stated_text}, arrived {sum_text}."
        if not found.all_read:
            detail += " Some quantities could not be read, so the total cannot be confirmed."
        faults.add(pointer("control", name), "control_mismatch", detail, stated_text)


def _counted(table: SupplyTable | DemandTable, faults: TableFaults) -> Counted:
    """Count one table as it was sent."""
    return Counted(
        rows=faults.sheet.rows,
        quantity=exact_sum(table.quantity),
        all_read=bool(table.quantity.present.all()),
    )
