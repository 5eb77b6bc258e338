"""What each further step of an item costs on lanes with a tariff, in the money of the plan."""

import numpy as np

from service.network.columns import IntArray, Network
from service.network.days import day_text, is_dated, movements_of
from service.network.freight import Run, rising_runs
from service.network.money import factors
from service.network.tariffs import departure_day, tariffs_on


def days_of_tariffs(network: Network) -> list[tuple[int, str, IntArray]]:
    """Return each tariff (its code) and day of departure that occur, and the lanes (rows) of both.

    Without dates all goods leave on the date of the cut-off.
    """
    codes = network.lanes.tariff.codes
    if not is_dated(network):
        day = departure_day(network.head)
        used = np.flatnonzero(np.bincount(codes[codes >= 0])).tolist()
        return [(code, day, np.flatnonzero(codes == code)) for code in used]
    moves = movements_of(network)
    own = np.flatnonzero(codes[moves.row] >= 0)
    rows, days = moves.row[own], moves.departs[own]
    found = []
    for code, day in sorted(set(zip(codes[rows].tolist(), days.tolist(), strict=True))):
        here = (codes[rows] == code) & (days == day)
        found.append((code, day_text(day), np.unique(rows[here])))
    return found


def freight_runs(network: Network, item: int, day: str) -> dict[int, tuple[Run, ...]]:
    """Return, by code of the column ``tariff``, the runs of steps of ``item`` that cost the same.

    Of goods that leave on ``day``. A tariff that does not hold then, by which the item cannot be
    measured, or by which a step can cost less than the one before, is left out: each is a fault of
    its own (``network/tariff_checks.py``).
    """
    names = network.lanes.tariff.values
    held = tariffs_on(network.head, day) if names else {}
    worth, thing = factors(network.head), network.items[item]
    found = {}
    for code, name in enumerate(names):
        tariff = held.get(name)
        of_step = None if tariff is None else tariff.measured([(thing, thing.step)])
        if tariff is None or of_step is None or tariff.currency not in worth:
            continue
        runs = rising_runs(tariff, of_step)
        if runs is not None:
            rate = worth[tariff.currency]
            found[code] = tuple(Run(run.width, run.money * rate) for run in runs)
    return found
