"""Where goods that arrive may stay overnight: rows of ``storage`` in the head of a network."""

from collections.abc import Mapping
from typing import Any, Final

import numpy as np

from service.network.columns import BoolArray, Network

FIELD: Final = "storage"


def storing_sites(network: Network, item: int | None) -> BoolArray:
    """Return, in shape (sites,), where goods of ``item`` (None: of any) may stay overnight."""
    rows: Any = network.head.get(FIELD, ())
    name = None if item is None else network.items[item].id
    stores = {row["site"] for row in rows if name is None or row.get("item", name) == name}
    return np.array([site.id in stores for site in network.sites], dtype=np.bool_)


def is_storage(value: object, sites: set[str], docks: set[str], items: set[str]) -> bool:
    """Return whether a value of a head is rows of storage in normal form."""
    if not isinstance(value, list) or not value:
        return False
    keys = []
    for row in value:
        if not isinstance(row, Mapping) or not {"site"} <= set(row) <= {"site", "item"}:
            return False
        if not all(isinstance(text, str) for text in row.values()):
            return False
        if row["site"] not in sites & docks or row.get("item", "") not in {"", *items}:
            return False
        keys.append((row["site"].encode(), row.get("item", "").encode()))
    return keys == sorted(set(keys)) and all(row.get("item") != "" for row in value)
