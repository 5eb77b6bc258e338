"""Dates of order lines: windows, wishes, and how late what they get is."""

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from service.proof.calendar import Calendar, day_of

if TYPE_CHECKING:
    from service.network.columns import Texts

_SHOWN = ("earliest", "due", "latest")


class OrderDates:
    """What order lines say of dates, and how late what they get is."""

    def __init__(self, calendar: Calendar) -> None:
        """Read the dates of all order lines."""
        demand = calendar.network.demand
        self.dated = calendar.dated
        self._columns: Mapping[str, Texts] = {name: getattr(demand, name) for name in _SHOWN}
        self._days = {
            name: [*map(day_of, column.values), 0] for name, column in self._columns.items()
        }

    def late(self, row: int, source: Mapping[str, Any]) -> int:
        """Return how many days after its wish a source arrives; 0 without dates."""
        due = self._day("due", row)
        return max(0, day_of(source.get("arrives") or "") - due) if due else 0

    def repeated(self, row: int, document: Mapping[str, Any]) -> dict[str, object]:
        """Return what an order line must say of dates, by what it gets.

        Something that is in no document, and so wrong, where a source misses its window.
        """
        if not self.dated:
            return {}
        shown: dict[str, object] = {
            name: column.text(row)
            for name, column in self._columns.items()
            if column.codes[row] >= 0
        }
        sources = document["sources"]
        first, last = self._day("earliest", row), self._day("latest", row)
        for source in sources:
            day = day_of(source.get("arrives") or "")
            if not day or day < first or (last and day > last):
                return {"out_of_its_window": True}
        return shown | {"days_late": max((self.late(row, source) for source in sources), default=0)}

    def _day(self, name: str, row: int) -> int:
        """Return a day of an order line, 0 where it has none."""
        day: int = self._days[name][self._columns[name].codes[row]]
        return day
