"""The forms in which a table can be sent, brought to one: rows, columns and cost tables."""

from collections.abc import Callable, Sequence

from service.network.cost_tables import cost_table_sheet, cost_tables_sheet
from service.network.faults import FAULTS_REPORTED_MAX, FaultList, pointer
from service.network.scanned import Scanned, ScannedGrid, ScannedRows, ScannedTexts
from service.network.sheets import Column, Sheet, refuse_field


def sheet_of(
    name: str, value: object, *, fields: Sequence[str], listed: frozenset[str], faults: FaultList
) -> Sheet | None:
    """Return a table in its one form, or None (with faults) where it has none.

    ``fields`` are those known for the table; ``listed`` those whose single value is an array.
    """
    if isinstance(value, dict):
        if name == "lanes" and ("origins" in value or "destinations" in value):
            return cost_table_sheet((name,), value, fields=fields, listed=listed, faults=faults)
        return _from_columns(name, value, fields=fields, faults=faults)
    if isinstance(value, ScannedRows):
        return _from_scanned_rows(name, value, fields=fields)
    if isinstance(value, list):
        first = value[0] if value else None
        if name == "lanes" and isinstance(first, dict) and {"origins", "destinations"} & set(first):
            return cost_tables_sheet(value, fields=fields, listed=listed, faults=faults)
        return _from_rows(name, value, fields=fields, faults=faults)
    forms = "an array of rows, an object of columns" + (
        ", a cost table or an array of cost tables" if name == "lanes" else ""
    )
    faults.add(pointer(name), "wrong_type", f"Send {forms}.", value)
    return None


def _from_rows(
    name: str, rows: list[object], *, fields: Sequence[str], faults: FaultList
) -> Sheet | None:
    """Return a table that was sent as an array of objects."""
    if set(map(type, rows)) - {dict} and not all(isinstance(row, dict) for row in rows):
        wrong = [place for place, row in enumerate(rows) if not isinstance(row, dict)]
        for place in wrong[:100]:
            faults.add(pointer(name, place), "wrong_type", "Each row is an object.", rows[place])
        faults.add_uncounted(len(wrong) - len(wrong[:100]))
        rows = [row if isinstance(row, dict) else {} for row in rows]
        if len(wrong) == len(rows):
            return None
    objects: list[dict[str, object]] = rows  # type: ignore[assignment] # all were checked
    seen: set[str] = set()
    strange: dict[str, list[int]] = {}
    known = frozenset(fields)
    for place, row in enumerate(objects):
        if known.issuperset(row):
            seen.update(row)
            continue
        for field in row:
            if field in known:
                seen.add(field)
            else:
                strange.setdefault(field, []).append(place)
    for field, places in strange.items():
        for place in places[:FAULTS_REPORTED_MAX]:
            refuse_field(name, field, pointer(name, place, field), faults)
        faults.add_uncounted(len(places[FAULTS_REPORTED_MAX:]))
    columns = {
        field: Column(
            values=[row.get(field) for row in objects],
            take=None,
            place=lambda row, field=field: pointer(name, row, field),  # type: ignore[misc] # bound now
        )
        for field in fields
        if field in seen
    }
    return Sheet(
        name=name,
        rows=len(objects),
        columns=columns,
        row_place=lambda row: pointer(name, row),
        in_rows=True,
    )


def _from_scanned_rows(name: str, value: ScannedRows, *, fields: Sequence[str]) -> Sheet:
    """Return a table that was sent as an array of objects, already in columns."""
    return Sheet(
        name=name,
        rows=value.rows,
        columns={
            field: _column(value.columns[field], lambda row, field=field: pointer(name, row, field))  # type: ignore[misc] # bound now
            for field in fields
            if field in value.columns
        },
        row_place=lambda row: pointer(name, row),
        in_rows=True,
    )


def _column(values: Sequence[object], place: Callable[[int], str]) -> Column:
    """Return a column of values, one for each row; ``place`` points to that of a row."""
    if isinstance(values, ScannedTexts):
        return Column(values=values.distinct, take=values.codes, place=place, by_rows=True)
    return Column(values=values, take=None, place=place)


def _from_columns(
    name: str, value: dict[str, object], *, fields: Sequence[str], faults: FaultList
) -> Sheet | None:
    """Return a table that was sent as an object of arrays of one length."""
    columns: dict[str, Column] = {}
    lengths: dict[str, int] = {}
    for field, sent in value.items():
        values = sent.lists() if isinstance(sent, ScannedGrid) else sent
        if field not in fields:
            refuse_field(name, field, pointer(name, field), faults)
        elif not isinstance(values, list | Scanned):
            detail = "A column is an array with one value for each row."
            faults.add(pointer(name, field), "wrong_type", detail, values)
        else:
            lengths[field] = len(values)
            columns[field] = _column(
                values,
                lambda row, field=field: pointer(name, field, row),  # type: ignore[misc] # bound now
            )
    if not columns:
        if not value:
            return Sheet(name=name, rows=0, columns={}, row_place=lambda _: pointer(name))
        return None
    first, lead = next(iter(columns.items()))
    rows = lengths[first]
    for field, length in lengths.items():
        if length != rows:
            detail = f"Columns have one length; this has {length}, {first} has {rows}."
            faults.add(pointer(name, field), "unequal_columns", detail)
            del columns[field]
    return Sheet(
        name=name,
        rows=rows,
        columns=columns,
        row_place=lead.place,
        refused=frozenset(value) - set(columns),
    )
