"""How old the stock of a network is, against its order lines and its cut-off."""

import numpy as np

from service.network.assembly import Assembly
from service.network.columns import IntArray, Texts
from service.network.faults import FaultList
from service.network.moments import Instant, read_instant

_NANOSECONDS_PER_MINUTE = 60 * 10**9


def check_stock_age(
    assembly: Assembly, cut_off: Instant, maximum_age_minutes: int | None, faults: FaultList
) -> None:
    """Find stock that is too old, and doubt stock that the newest orders did not see."""
    network, sent = assembly.network, assembly.sent.supply.faults
    moments = _nanoseconds(network.supply.as_of)
    known = np.flatnonzero(network.supply.as_of.codes >= 0)
    if maximum_age_minutes is not None:
        oldest = cut_off.nanoseconds - maximum_age_minutes * _NANOSECONDS_PER_MINUTE
        rows = np.sort(assembly.supply_rows[known[moments[known] < oldest]])
        detail = f"Older than {maximum_age_minutes} minutes at the cut-off. Send fresh stock."
        sent.at_rows("as_of", rows, "stock_too_old", detail)
        rows = np.sort(assembly.supply_rows[network.supply.as_of.codes < 0])
        faults.caution(
            "stock_age_unknown",
            "The row has no as_of, so its age cannot be checked.",
            [(sent.place("as_of", row), None) for row in rows[:3].tolist()],
            len(rows),
        )
    ordered_at = network.demand.ordered_at
    if not ordered_at.values:
        return
    newest = int(_nanoseconds(ordered_at)[ordered_at.codes >= 0].max())
    rows = np.sort(assembly.supply_rows[known[moments[known] < newest]])
    faults.caution(
        "stock_older_than_orders",
        "The stock was counted before the newest order line was placed.",
        [(sent.place("as_of", row), sent.value("as_of", row)) for row in rows[:3].tolist()],
        len(rows),
    )


def _nanoseconds(column: Texts) -> IntArray:
    """Return the moments of a column since 1970, 0 where there is none.

    Years 1678 to 2261 fit in 64 bits; what lies outside counts as their edge.
    """
    edge = 2**63 - 1
    moments = [read_instant(text).nanoseconds for text in column.values]
    known = np.array([*(max(-edge, min(edge, moment)) for moment in moments), 0], dtype=np.int64)
    found: IntArray = known[column.codes]
    return found
