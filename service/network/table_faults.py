"""The faults of one table, found by array operations and kept by row until it is known what to do.

With the option to set bad rows aside, an order line with faults is listed and left out; otherwise
its faults refuse the network.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from service.network.columns import BoolArray, IntArray
from service.network.faults import FAULTS_REPORTED_MAX, Fault, FaultList, pointer, value_text
from service.network.sheets import Column, Sheet


@dataclass(frozen=True, slots=True, kw_only=True)
class _Report:
    """One check that failed at ``rows`` (ascending), once for each of ``positions`` of a column."""

    field: str
    column: Column | None
    positions: IntArray
    rows: IntArray
    code: str
    detail: str


@dataclass(slots=True)
class TableFaults:
    """Collects what is wrong in ``sheet``; ``bad`` marks the rows that no plan can use."""

    sheet: Sheet
    bad: BoolArray = field(init=False)
    _reports: list[_Report] = field(default_factory=list)

    def __post_init__(self) -> None:
        """Start with every row good."""
        self.bad = np.zeros(self.sheet.rows, dtype=np.bool_)

    def at_values(
        self, name: str, positions: IntArray | Sequence[int], code: str, detail: str
    ) -> None:
        """Report values of a column that are wrong, each once, whatever rows share it."""
        self._add(name, np.asarray(positions, dtype=np.int64), None, code, detail)

    def at_rows(
        self,
        name: str,
        rows: IntArray | Sequence[int],
        code: str,
        detail: str,
        *,
        once: bool = False,
    ) -> None:
        """Report rows in which the value of field ``name`` is wrong beside the others.

        With the empty name it is the row as a whole that is wrong.

        ``once`` reports a value that many rows share one time: the mistake is in the value itself.
        """
        wanted = np.asarray(rows, dtype=np.int64)
        column = self.sheet.columns.get(name)
        positions = None
        if once and column is not None and column.take is not None:
            positions = np.unique(column.take[wanted])
        self._add(name, positions, wanted, code, detail)

    def missing_column(self, name: str, detail: str) -> None:
        """Report that a column which every row needs was not sent at all."""
        rows = np.arange(self.sheet.rows, dtype=np.int64)
        self.bad[:] = True
        self._reports.append(
            _Report(
                field=name,
                column=None,
                positions=np.zeros(1, dtype=np.int64),
                rows=rows,
                code="missing_field",
                detail=detail,
            )
        )

    def adopt(self, name: str, inner: "TableFaults") -> None:
        """Take over what is wrong inside the values of a column, which was read as a table."""
        for report in inner._reports:  # noqa: SLF001 - its own kind
            self.bad[report.rows] = True
            self._reports.append(replace(report, field=name))

    def faulty(self, name: str) -> BoolArray:
        """Return in which rows a fault of field ``name`` was reported."""
        rows = np.zeros(self.sheet.rows, dtype=np.bool_)
        for report in self._reports:
            if report.field == name:
                rows[report.rows] = True
        return rows

    def _add(
        self, name: str, positions: IntArray | None, rows: IntArray | None, code: str, detail: str
    ) -> None:
        """Keep a report unless nothing is wrong."""
        column = self.sheet.columns.get(name)
        if rows is None and positions is not None and column is not None:
            rows = column.rows_with(positions, self.sheet.rows)
        if rows is None:
            return
        if column is not None and column.by_rows:
            positions = rows
        elif positions is None:
            positions = rows if column is None or column.take is None else column.take[rows]
        if len(positions) == 0:
            return
        self.bad[rows] = True
        self._reports.append(
            _Report(
                field=name, column=column, positions=positions, rows=rows, code=code, detail=detail
            )
        )

    def refuse(self, faults: FaultList) -> None:
        """Report everything as faults of the network: of each field the first ones, and a count.

        The first hundred faults of all are among the first hundred of each field, whatever form the
        table has.
        """
        by_field: dict[str, list[_Report]] = {}
        for report in self._reports:
            if report.column is None and report.field and not self.sheet.in_rows:
                # The whole column is missing: that is one fault, not one a row.
                faults.extend([self._fault(report, 0)])
            else:
                by_field.setdefault(report.field, []).append(report)
        for reports in by_field.values():
            positions = np.concatenate([report.positions for report in reports])
            number = np.repeat(
                np.arange(len(reports)), [len(report.positions) for report in reports]
            )
            first = np.argsort(positions, kind="stable")[:FAULTS_REPORTED_MAX]
            faults.extend(
                self._fault(reports[which], position)
                for which, position in zip(
                    number[first].tolist(), positions[first].tolist(), strict=True
                )
            )
            faults.add_uncounted(len(positions) - len(first))

    def by_row(self) -> dict[int, list[Fault]]:
        """Return the faults of each bad row; the rows ascend."""
        found: dict[int, list[Fault]] = {row: [] for row in np.flatnonzero(self.bad).tolist()}
        for report in self._reports:
            for row, position in zip(report.rows.tolist(), report.positions.tolist(), strict=False):
                found[row].append(self._fault(report, position))
        return found

    def whole_column_missing(self) -> bool:
        """Return whether a column that every row needs was not sent at all."""
        return not self.sheet.in_rows and any(
            report.column is None and report.field for report in self._reports
        )

    def place(self, name: str, row: int) -> str:
        """Return the pointer of a field in a row, or of the row where it has no such value."""
        column = self.sheet.columns.get(name)
        return self.sheet.row_place(row) if column is None else column.place_in(row)

    def value(self, name: str, row: int) -> object:
        """Return the value of a field in a row as sent."""
        column = self.sheet.columns.get(name)
        return None if column is None else column.shown(column.position(row))

    def _fault(self, report: _Report, position: int) -> Fault:
        """Return the fault of one value; ``position`` is a row where the column goes by rows."""
        if report.column is not None:
            at = report.column.position(position) if report.column.by_rows else position
            place, value = report.column.place(position), value_text(report.column.shown(at))
        elif not report.field:
            place, value = self.sheet.row_place(position), None
        else:
            value = None
            place = (
                pointer(self.sheet.name, position, report.field)
                if self.sheet.in_rows
                else pointer(self.sheet.name, report.field)
            )
        return Fault(pointer=place, code=report.code, detail=report.detail, value=value)
