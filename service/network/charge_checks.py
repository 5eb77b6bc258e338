"""Checks of charges against the items that can use their lanes."""

import numpy as np

from service.network.assembly import Assembly
from service.network.money import charges_of
from service.network.reach import LaneUse
from service.network.row_checks import MEASURE_ADVICE


def check_charges(assembly: Assembly, use: LaneUse) -> None:
    """Find charges by what an item that can use the lane does not say of itself."""
    network, lanes = assembly.network, assembly.network.lanes
    if not lanes.charges.values:
        return
    charges = [charges_of(text) for text in lanes.charges.values]
    faults = assembly.sent.lanes.faults
    for item, thing in enumerate(network.items):
        rows = use.rows(item)
        rows = rows[lanes.charges.codes[rows] >= 0]
        for code in np.flatnonzero(np.bincount(lanes.charges.codes[rows])).tolist():
            for charge in charges[code]:
                if not charge.concerns(thing) or charge.per_item_unit(thing) is not None:
                    continue
                advice = MEASURE_ADVICE if charge.percent is None else "Say its value."
                detail = f"{thing.id} can use this lane, but not be charged {charge.name}. {advice}"
                sent = np.sort(assembly.lane_rows[rows[lanes.charges.codes[rows] == code]])
                faults.at_rows("charges", sent, "measure_unknown", detail, once=True)
