"""A dense network as a body, in every form in which one can be sent."""

import io
import zipfile
from collections.abc import Callable, Mapping
from typing import Any, Final

import numpy as np
import orjson
import pyarrow as pa
import pyarrow.parquet as pq

from service.network.columns import IntArray
from service.network.files.media_types import JSON, ZIP
from tests.benchmarks.instances import CENTS, UNLIMITED, Dense

CUT_OFF = "2026-02-03T16:00:00+01:00"
ITEM = "GOODS"

Document = dict[str, Any]


def warehouse_ids(network: Dense) -> list[str]:
    """Return the ids of the warehouses."""
    return [f"W{number:04d}" for number in range(1, network.supply.shape[0] + 1)]


def ship_to_ids(network: Dense) -> list[str]:
    """Return the ids of the ship-tos, which are the references of their order lines too."""
    return [f"S{number:06d}" for number in range(1, network.demand.shape[0] + 1)]


def table_body(network: Dense) -> bytes:
    """Return JSON with the lanes as a cost table."""
    lanes = {
        "origins": warehouse_ids(network),
        "destinations": ship_to_ids(network),
        "item": ITEM,
        "unit_cost": _prices(network.cost),
    }
    if _capped(network):
        lanes["capacity"] = _limits(network.capacity)
    return orjson.dumps(_document(network, lanes))


def columns_body(network: Dense) -> bytes:
    """Return JSON with every table as columns."""
    origins, destinations = _ends(network)
    lanes = {
        "origin": origins,
        "destination": destinations,
        "item": [ITEM] * len(origins),
        "unit_cost": _prices(network.cost.ravel()),
    }
    if _capped(network):
        lanes["capacity"] = _limits(network.capacity.ravel())
    return orjson.dumps(_document(network, lanes))


def rows_body(network: Dense) -> bytes:
    """Return JSON with an object for each lane."""
    origins, destinations = _ends(network)
    rows: list[Document] = [
        {"origin": origin, "destination": destination, "item": ITEM, "unit_cost": cost}
        for origin, destination, cost in zip(
            origins, destinations, _prices(network.cost.ravel()), strict=True
        )
    ]
    if _capped(network):
        for row, limit in zip(rows, _limits(network.capacity.ravel()), strict=True):
            if limit is not None:
                row["capacity"] = limit
    return orjson.dumps(_document(network, rows))


def parquet_body(network: Dense) -> bytes:
    """Return a zip with the lanes as Parquet, zstd inside, and the rest as JSON."""
    file = io.BytesIO()
    pq.write_table(_lane_table(network), file, compression="zstd")
    return _package(network, "lanes.parquet", file.getvalue())


def arrow_body(network: Dense) -> bytes:
    """Return a zip with the lanes as an Arrow file and the rest as JSON."""
    table = _lane_table(network)
    file = io.BytesIO()
    with pa.ipc.new_file(file, table.schema) as writer:
        writer.write_table(table)
    return _package(network, "lanes.arrow", file.getvalue())


# Each form by its name in the report: how it is made, and its media type.
FORMS: Final[Mapping[str, tuple[Callable[[Dense], bytes], str]]] = {
    "cost table": (table_body, JSON),
    "columns": (columns_body, JSON),
    "rows": (rows_body, JSON),
    "Parquet": (parquet_body, ZIP),
    "Arrow": (arrow_body, ZIP),
}


def _document(network: Dense, lanes: object) -> Document:
    """Return the whole definition; what is in few rows is columns too, but for the sites."""
    warehouses, ship_tos = warehouse_ids(network), ship_to_ids(network)
    document: Document = {
        "format": 1,
        "currency": "EUR",
        "cut_off": CUT_OFF,
        "items": [{"id": ITEM, "unit": "unit"}],
        "sites": [
            *({"id": site, "roles": ["warehouse"]} for site in warehouses),
            *({"id": site, "roles": ["ship_to"]} for site in ship_tos),
        ],
        "supply": {
            "site": warehouses,
            "item": [ITEM] * len(warehouses),
            "quantity": network.supply.tolist(),
        },
        "demand": {
            "reference": ship_tos,
            "site": ship_tos,
            "item": [ITEM] * len(ship_tos),
            "quantity": network.demand.tolist(),
        },
    }
    return document if lanes is None else {**document, "lanes": lanes}


def _package(network: Dense, name: str, lanes: bytes) -> bytes:
    """Return a zip of the lanes and of a definition that leaves them out."""
    file = io.BytesIO()
    with zipfile.ZipFile(file, "w", zipfile.ZIP_STORED) as archive:
        archive.writestr("network.json", orjson.dumps(_document(network, None)))
        archive.writestr(name, lanes)
    return file.getvalue()


def _lane_table(network: Dense) -> pa.Table:
    """Return the lanes as columns of Arrow: ids once, money as decimal128, whole capacities."""
    warehouses, ship_tos = network.cost.shape
    columns = {
        "origin": pa.DictionaryArray.from_arrays(
            np.repeat(np.arange(warehouses, dtype=np.int32), ship_tos), warehouse_ids(network)
        ),
        "destination": pa.DictionaryArray.from_arrays(
            np.tile(np.arange(ship_tos, dtype=np.int32), warehouses), ship_to_ids(network)
        ),
        "item": pa.DictionaryArray.from_arrays(np.zeros(network.cost.size, np.int32), [ITEM]),
        "unit_cost": _decimals(network.cost.ravel()),
    }
    if _capped(network):
        limits = network.capacity.ravel()
        columns["capacity"] = pa.array(limits, mask=limits == UNLIMITED)
    return pa.table(columns)


def _decimals(cents: IntArray) -> pa.Array:
    """Return amounts as decimal128 with two places: 16 bytes a value, the low ones first."""
    words = np.stack((cents, np.where(cents < 0, -1, 0)), axis=1).astype("<i8")
    return pa.Array.from_buffers(
        pa.decimal128(12, 2), cents.shape[0], [None, pa.py_buffer(words.tobytes())]
    )


def _ends(network: Dense) -> tuple[list[str], list[str]]:
    """Return origin and destination of every lane."""
    warehouses, ship_tos = warehouse_ids(network), ship_to_ids(network)
    return [site for site in warehouses for _ in ship_tos], ship_tos * len(warehouses)


def _prices(cents: IntArray) -> list[Any]:
    """Return money as numbers that JSON writes with at most two places, exactly."""
    prices: list[Any] = (cents / CENTS).tolist()
    return prices


def _limits(capacity: IntArray) -> list[Any]:
    """Return capacities, None where there is none."""
    limits: Any = capacity.astype(object)
    limits[capacity == UNLIMITED] = None
    listed: list[Any] = limits.tolist()
    return listed


def _capped(network: Dense) -> bool:
    """Return whether any lane has a capacity."""
    return bool((network.capacity != UNLIMITED).any())
