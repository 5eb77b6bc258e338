"""Checks of tariffs against the lanes that name them and the items that can use those."""

from collections.abc import Mapping, Sequence

import numpy as np

from service.network.assembly import Assembly
from service.network.columns import IntArray, Item
from service.network.faults import FaultList
from service.network.freight import is_even, rising_runs
from service.network.lane_freight import days_of_tariffs
from service.network.not_yet import SHARED, WHOLE, refusal
from service.network.reach import LaneUse
from service.network.row_checks import MEASURE_ADVICE
from service.network.tariffs import CHARGEABLE, Tariff, tariffs_of


def check_tariffs(
    assembly: Assembly, use: LaneUse, doubts: FaultList, *, unsure: frozenset[str]
) -> None:
    """Find lanes without a tariff on their day, and tariffs that cannot be planned with yet.

    ``unsure`` are the ids of tariffs that are refused themselves: their lanes are not blamed.
    """
    network, lanes = assembly.network, assembly.network.lanes
    if not lanes.tariff.values:
        return
    checks = _Checks(assembly)
    held = checks.days(unsure)
    for check in (checks.users, checks.rising):
        for item in range(len(network.items)):
            rows = use.rows(item)
            rows = rows[lanes.tariff.codes[rows] >= 0]
            codes = lanes.tariff.codes[rows]
            for code in np.flatnonzero(np.bincount(codes)).tolist():
                for tariff in held.get(code, ()):
                    check(network.items[item], tariff, rows[codes == code])
    checks.carriers(held, doubts)


class _Checks:
    """Reports what is wrong with the tariffs of lanes, those alike together."""

    def __init__(self, assembly: Assembly) -> None:
        """Keep the network."""
        self._assembly = assembly
        self._lanes = assembly.network.lanes
        count = len(self._lanes)
        self._users = np.zeros(count, dtype=np.int32)
        # An item is one user of a lane, however many versions of its tariff hold on some day.
        self._seen = np.full(count, "", dtype=object)
        self._heavy, self._bulky, self._told = np.zeros((3, count), dtype=np.bool_)

    def days(self, unsure: frozenset[str]) -> dict[int, list[Tariff]]:
        """Find lanes whose tariff does not hold on a day on which goods leave.

        Return the tariffs that do, by code of the column.
        """
        network, lanes = self._assembly.network, self._lanes
        tariffs = tariffs_of(network.head)
        found: dict[int, list[Tariff]] = {}
        for code, day, rows in days_of_tariffs(network):
            name = lanes.tariff.values[code]
            held = [own for own in tariffs if own.id == name and own.holds_on(day)]
            found.setdefault(code, []).extend(own for own in held if own not in found.get(code, []))
            if not held and name not in unsure:
                detail = f"No tariff of this id holds on {day}, a day of departure."
                self._refuse(rows, "tariff_not_valid", detail)
        return found

    def users(self, item: Item, tariff: Tariff, rows: IntArray) -> None:
        """Count the items that can use each of ``rows``, and see by what each is charged."""
        self._users[rows] += self._seen[rows] != item.id
        self._seen[rows] = item.id
        if tariff.measure == CHARGEABLE and tariff.kg_per_m3 is not None:
            over = (item.weight_kg or 0) - (item.volume_m3 or 0) * tariff.kg_per_m3
            self._heavy[rows] |= over > 0
            self._bulky[rows] |= over < 0

    def rising(self, item: Item, tariff: Tariff, rows: IntArray) -> None:
        """Find lanes on which what a further step of an item costs does not only rise."""
        of_step = tariff.measured([(item, item.step)])
        if of_step is None:
            detail = f"{item.id} can use this lane, and {tariff.id} is by {tariff.measure}. "
            self._refuse(rows, "measure_unknown", detail + MEASURE_ADVICE)
        elif rising_runs(tariff, of_step) is None:
            detail = (
                f"By {tariff.id} a further step of {item.id} can cost less than the one before "
                f"(falling rates, a minimum charge or a rounding). {refusal(tariff.id, WHOLE)}"
            )
            self._refuse(rows, "not_yet", detail)
        else:
            shared = self._users[rows] > 1
            if is_even(tariff):
                shared &= self._heavy[rows] & self._bulky[rows]
            detail = (
                f"Several items can use this lane, and by {tariff.id} what one of them costs "
                f"depends on the others. {refusal(tariff.id, SHARED)}"
            )
            self._refuse(rows[shared & ~self._told[rows]], "not_yet", detail)
            self._told[rows[shared]] = True

    def carriers(self, held: Mapping[int, Sequence[Tariff]], doubts: FaultList) -> None:
        """Doubt lanes of one carrier by the tariff of another."""
        lanes, sent = self._lanes, self._assembly.sent.lanes.faults
        found: list[int] = []
        for code, tariffs in held.items():
            for carrier in {tariff.carrier for tariff in tariffs} - {None}:
                own = lanes.carrier.values.index(carrier) if carrier in lanes.carrier.values else -2
                other = (lanes.carrier.codes >= 0) & (lanes.carrier.codes != own)
                found += np.flatnonzero((lanes.tariff.codes == code) & other).tolist()
        rows = sorted(self._assembly.lane_rows[found].tolist())
        doubts.caution(
            "tariff_of_another_carrier",
            "The lane names one carrier, its tariff another.",
            [(sent.place("tariff", row), sent.value("tariff", row)) for row in rows[:3]],
            len(rows),
        )

    def _refuse(self, rows: IntArray, code: str, detail: str) -> None:
        """Report rows of the network at their places as sent."""
        sent = np.sort(self._assembly.lane_rows[rows])
        self._assembly.sent.lanes.faults.at_rows("tariff", sent, code, detail, once=True)
