"""The normal form as bytes: one digest for one network, whatever way it was sent.

A network is a head in canonical JSON and one entry per column; the head names the digest of every
column, so that the digest of the head is the digest of the whole network.
"""

import hashlib
import itertools
from collections.abc import Mapping
from pathlib import Path
from typing import Any, TypeVar, cast

import numpy as np

from service.network.canonical_head import item_document, item_of, site_document, site_of
from service.network.canonical_json import NotCanonicalError, canonical_json
from service.network.column_bytes import (
    TABLE_FORMS,
    ColumnForm,
    NormalFormError,
    Octets,
    code_bytes,
    code_column,
    decimal_bytes,
    decimal_column,
    text_bytes,
    text_column,
    texts_bytes,
    texts_column,
)
from service.network.column_making import no_decimals, no_texts
from service.network.columns import (
    Decimals,
    DemandTable,
    LaneTable,
    Network,
    SupplyTable,
    Texts,
)
from service.network.normal_form import normal_form
from service.network.normal_rows import check_head, check_rows
from service.network.stored_zip import ZipFormError, stored_entries, write_stored_zip
from service.network.strict_json import StrictJsonError, strict_json

__all__ = [
    "NormalFormError",
    "canonical_json",
    "digest",
    "network_digest",
    "network_entries",
    "network_from_entries",
    "normal_form",
    "read_network",
    "write_network",
]

HEAD_ENTRY = "network/head.json"

_Table = TypeVar("_Table", SupplyTable, DemandTable, LaneTable)


def digest(data: Octets) -> str:
    """Return the SHA-256 of ``data`` as it is written everywhere: ``sha-256:`` and hex."""
    return f"sha-256:{hashlib.sha256(data).hexdigest()}"


def network_entries(network: Network) -> dict[str, bytes]:
    """Return the entries of ``network``, which is in normal form, by name and sorted by it."""
    return {name: bytes(content) for name, content in _entries(network).items()}


def network_digest(network: Network) -> str:
    """Return the digest of ``network``, which is in normal form."""
    if network.known_digest is not None:
        return network.known_digest
    return digest(_entries(network)[HEAD_ENTRY])


def write_network(network: Network, path: Path) -> str:
    """Write the entries of ``network`` as a zip and return the network's digest."""
    entries = _entries(network)
    write_stored_zip(path, entries)
    return digest(entries[HEAD_ENTRY])


def read_network(path: Path) -> Network:
    """Return the network in the zip at ``path``; raise ``NormalFormError`` if it is not normal.

    Its digest, which follows from what was read, stays known.
    """
    try:
        entries, damaged = stored_entries(path.read_bytes())
    except ZipFormError as error:
        raise NormalFormError(f"the zip cannot be read: {error}") from error
    if damaged:
        raise NormalFormError(f"the zip is damaged at {damaged[0]}")
    return network_from_entries(entries)


def _entries(network: Network) -> dict[str, Octets]:
    """Return the entries of ``network`` sorted by name, large ones as views of its columns."""
    entries: dict[str, Octets] = {}
    tables: dict[str, object] = {}
    for table, forms in TABLE_FORMS.items():
        rows = getattr(network, table)
        columns: dict[str, object] = {}
        for form in forms:
            column = getattr(rows, form.field)
            described = _described(column, form)
            if described is None:
                continue
            entry = _column_entry(column, form)
            entries[f"network/{table}/{form.name}"] = entry
            columns[form.name] = described | {"digest": digest(entry)}
        tables[table] = {"rows": len(rows), "columns": columns}
    head = {
        **network.head,
        "items": [item_document(item) for item in network.items],
        "sites": [site_document(site) for site in network.sites],
        "tables": tables,
    }
    entries[HEAD_ENTRY] = canonical_json(head)
    return dict(sorted(entries.items()))


def network_from_entries(entries: Mapping[str, Octets]) -> Network:
    """Return the network that ``entries`` hold; raise ``NormalFormError`` if it is not normal."""
    head = _head(entries)
    documents, tables = head.pop("items"), head.pop("tables")
    items = tuple(item_of(document) for document in documents)
    known = frozenset(item.id for item in items)
    sites = tuple(site_of(document, known) for document in head.pop("sites"))
    for things in (items, sites):
        ids = [thing.id.encode() for thing in things]
        if any(former >= latter for former, latter in itertools.pairwise(ids)):
            raise NormalFormError("ids are not sorted and distinct")
    counts = {"items": len(items), "sites": len(sites)}
    expected = {HEAD_ENTRY}
    columns: dict[str, dict[str, object]] = {}
    for table, forms in TABLE_FORMS.items():
        columns[table] = _columns(table, forms, tables[table], entries, counts)
        expected |= {f"network/{table}/{column}" for column in tables[table]["columns"]}
    if set(entries) != expected:
        raise NormalFormError("the entries are not those that the head names")
    network = Network(
        head=head,
        items=items,
        sites=sites,
        supply=_table(SupplyTable, columns["supply"]),
        demand=_table(DemandTable, columns["demand"]),
        lanes=_table(LaneTable, columns["lanes"]),
    )
    check_rows(network)
    # Whoever makes another network of this one makes one without a known digest.
    object.__setattr__(network, "known_digest", digest(entries[HEAD_ENTRY]))
    return network


def _table(kind: type[_Table], columns: Mapping[str, object]) -> _Table:
    """Return the table of ``columns``, each of which was made for its field.

    Nobody can change what is in them: the digest that is known of them would be wrong.
    """
    for column in columns.values():
        for part in ("values", "present", "codes"):
            array = getattr(column, part, None)
            if isinstance(array, np.ndarray):
                array.flags.writeable = False
        if isinstance(column, np.ndarray):
            column.flags.writeable = False
    return kind(**cast("Any", columns))


def _head(entries: Mapping[str, Octets]) -> dict[str, Any]:
    """Return the parsed head, its shape checked down to the columns of the tables."""
    if HEAD_ENTRY not in entries:
        raise NormalFormError("the head is missing")
    data = bytes(entries[HEAD_ENTRY])
    try:
        head = strict_json(data)
        # One comparison finds spaces, floats and every other spelling.
        canonical = canonical_json(head)
    except (StrictJsonError, NotCanonicalError) as error:
        raise NormalFormError(f"the head is not canonical JSON: {error}") from error
    if canonical != data or not isinstance(head, dict):
        raise NormalFormError("the head is not canonical JSON")
    check_head(head)
    return head


def _described(column: object, form: ColumnForm) -> dict[str, object] | None:
    """Return how the head describes a column, but for its digest; None where all is absent."""
    described: dict[str, object] = {"type": form.kind}
    if isinstance(column, Decimals):
        if not column.present.any():
            return None
        described["exponent"] = column.exponent
        if not column.present.all():
            described["nulls"] = True
        return described
    if isinstance(column, Texts):
        return described if column.values else None
    if not isinstance(column, np.ndarray):
        raise NormalFormError(f"{form.field} is no column")
    absent: object = b"" if form.kind == "text" else 0 if form.kind == "small" else -1
    if not (column != absent).any():
        return None
    if form.of is not None:
        described["of"] = form.of
    return described


def _column_entry(column: object, form: ColumnForm) -> Octets:
    """Return the bytes of a column."""
    if isinstance(column, Decimals):
        return decimal_bytes(column)
    if isinstance(column, Texts):
        return texts_bytes(column)
    array = cast("Any", column)
    return text_bytes(array) if form.kind == "text" else code_bytes(array)


def _columns(
    table: str,
    forms: tuple[ColumnForm, ...],
    described: Mapping[str, Any],
    entries: Mapping[str, Octets],
    counts: Mapping[str, int],
) -> dict[str, object]:
    """Return the columns of a table by field, absent ones made up."""
    rows = described["rows"]
    known = {form.name for form in forms}
    if not set(described["columns"]) <= known:
        raise NormalFormError(f"{table} has an unknown column")
    for form in forms:
        column = described["columns"].get(form.name)
        if column is None:
            if form.required and rows:
                raise NormalFormError(f"{table}/{form.name} is missing")
            continue
        entry = entries.get(f"network/{table}/{form.name}")
        if entry is None or digest(entry) != column["digest"]:
            raise NormalFormError(f"{table}/{form.name} does not have the digest in the head")
        # Every kind has at least four bytes a row: the number of rows is bounded by the file.
        if len(entry) < 4 * rows:
            raise NormalFormError(f"{table}/{form.name} is shorter than its table")
    columns: dict[str, object] = {}
    for form in forms:
        column = described["columns"].get(form.name)
        if column is None:
            columns[form.field] = _absent_column(form, rows)
            continue
        entry = entries[f"network/{table}/{form.name}"]
        columns[form.field] = _read_column(entry, form, rows, column, counts)
        # That the bytes are those of the column follows from how they were read.
        stated = {key: value for key, value in column.items() if key != "digest"}
        if _described(columns[form.field], form) != stated:
            raise NormalFormError(f"{table}/{form.name} is not described as it is")
    return columns


def _absent_column(form: ColumnForm, rows: int) -> object:
    """Return a column in which every value is absent."""
    if form.kind == "decimal":
        return no_decimals(rows)
    if form.kind == "texts":
        return no_texts(rows)
    if form.kind == "text":
        return np.broadcast_to(np.bytes_(b""), (rows,))
    return np.broadcast_to(np.int32(0 if form.kind == "small" else -1), rows)


def _read_column(
    entry: Octets, form: ColumnForm, rows: int, column: Mapping[str, Any], counts: Mapping[str, int]
) -> object:
    """Return the column in ``entry``, its values in range."""
    if form.kind == "decimal":
        return decimal_column(
            entry, rows, exponent=column.get("exponent", -1), nulls=column.get("nulls", False)
        )
    if form.kind == "texts":
        return texts_column(entry, rows)
    if form.kind == "text":
        return text_column(entry, rows)
    codes = code_column(entry, rows)
    least = 0 if form.required or form.kind == "small" else -1
    most = 9 if form.of is None else counts[form.of] - 1
    if rows and (int(codes.min()) < least or int(codes.max()) > most):
        raise NormalFormError(f"{form.name} is out of range")
    return codes
