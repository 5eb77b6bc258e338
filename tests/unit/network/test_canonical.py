"""The normal form: one network has one form in bytes, and nothing else is taken for one."""

import json
import random
import struct
from dataclasses import fields, replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import rfc8785

from service.network.canonical import (
    NormalFormError,
    digest,
    network_digest,
    network_entries,
    network_from_entries,
    normal_form,
    read_network,
    write_network,
)
from service.network.column_bytes import text_bytes, text_column
from service.network.columns import Decimals, Network, Texts
from service.network.stored_zip import read_stored_zip, stored_zip
from tests.evidence.zips import entries_of, good_zip, network_of

SEEDS = range(8)


def network_of_seed(seed: int) -> Network:
    """Return the network of a random run."""
    return network_of(entries_of(good_zip(seed)))


def rich_networks() -> list[Network]:
    """Return random networks in which every table has several rows."""
    networks = map(network_of_seed, range(24))
    return [
        network
        for network in networks
        if min(len(network.supply), len(network.demand), len(network.lanes)) > 1
    ]


def shuffled(network: Network, rng: random.Random) -> Network:
    """Return the same network with items, sites, rows and texts in another order."""
    items = rng.sample(range(len(network.items)), len(network.items))
    sites = rng.sample(range(len(network.sites)), len(network.sites))
    place_of_item = {old: new for new, old in enumerate(items)} | {-1: -1}
    place_of_site = {old: new for new, old in enumerate(sites)}
    tables: dict[str, Any] = {}
    for name in ("supply", "demand", "lanes"):
        table = getattr(network, name)
        order = np.array(rng.sample(range(len(table)), len(table)), dtype=np.int64)
        columns: dict[str, Any] = {}
        for field in fields(table):
            column = getattr(table, field.name)
            if isinstance(column, Texts):
                values = [*reversed(column.values), "never used"]
                codes = np.where(column.codes < 0, -1, len(column.values) - 1 - column.codes)
                changed: object = Texts(codes=codes[order].astype(np.int32), values=tuple(values))
            elif isinstance(column, Decimals):
                changed = Decimals(
                    values=column.values[order] * 10,
                    present=column.present[order],
                    exponent=column.exponent + 1,
                )
            elif field.name in ("site", "origin", "destination"):
                places = [place_of_site[code] for code in column[order].tolist()]
                changed = np.array(places, dtype=np.int32)
            elif field.name == "item":
                places = [place_of_item[code] for code in column[order].tolist()]
                changed = np.array(places, dtype=np.int32)
            else:
                changed = column[order]
            columns[field.name] = changed
        tables[name] = replace(table, **columns)
    head = {**network.head, "name": network.head.get("name"), "extra": {}}
    return Network(
        head=head,
        items=tuple(network.items[at] for at in items),
        sites=tuple(network.sites[at] for at in sites),
        **tables,
    )


@pytest.mark.parametrize("seed", SEEDS)
def test_order_and_spelling_do_not_change_a_byte(seed: int) -> None:
    """Whatever order things were sent in, and however numbers were spelled, the form is one."""
    network = network_of_seed(seed)

    again = normal_form(shuffled(network, random.Random(seed)))  # noqa: S311 - a test that repeats

    assert network_entries(again) == network_entries(network)


@pytest.mark.parametrize("seed", SEEDS)
def test_reading_gives_back_what_was_written(seed: int, tmp_path: Path) -> None:
    """The file holds all of the network; its digest is that of the head alone."""
    network = network_of_seed(seed)

    named = write_network(network, tmp_path / "network.zip")
    again = read_network(tmp_path / "network.zip")

    assert network_entries(again) == network_entries(network)
    assert named == network_digest(again) == digest(network_entries(network)["network/head.json"])
    assert (again.items, again.sites) == (network.items, network.sites)


@pytest.mark.parametrize("seed", SEEDS)
def test_head_is_canonical_for_the_published_oracle(seed: int) -> None:
    """The head is RFC 8785; the digest of each column is in it."""
    entries = network_entries(network_of_seed(seed))
    head = json.loads(entries["network/head.json"])

    assert rfc8785.dumps(head) == entries["network/head.json"]
    for table, described in head["tables"].items():
        for column, says in described["columns"].items():
            assert says["digest"] == digest(entries[f"network/{table}/{column}"])


def test_columns_have_the_bytes_that_the_format_says() -> None:
    """The forms are derived here by hand with struct, little endian."""
    network = rich_networks()[0]
    entries = network_entries(network)
    lanes, demand = network.lanes, network.demand

    codes = struct.pack(f"<{len(lanes)}i", *lanes.origin.tolist())
    costs = struct.pack(f"<{len(lanes)}q", *lanes.unit_cost.values.tolist())
    references = b"".join(struct.pack("<I", len(name)) + name for name in demand.reference.tolist())
    measure = struct.pack("<I", len(lanes.measure.values))
    for value in lanes.measure.values:
        measure += struct.pack("<I", len(value.encode())) + value.encode()
    measure += struct.pack(f"<{len(lanes)}i", *lanes.measure.codes.tolist())

    assert entries["network/lanes/origin"] == codes
    assert entries["network/lanes/unit_cost"] == costs
    assert entries["network/demand/reference"] == references
    assert entries["network/lanes/measure"] == measure


def test_absent_decimals_are_marked_in_a_bitmap() -> None:
    """Bit r % 8 of byte r // 8, least significant first, is 1 where row r is absent."""
    network = next(
        network
        for network in rich_networks()
        if 0 < int(network.lanes.capacity.present.sum()) < len(network.lanes)
    )
    capacity = network.lanes.capacity
    bitmap = bytearray((len(network.lanes) + 7) // 8)
    for row, present in enumerate(capacity.present.tolist()):
        if not present:
            bitmap[row // 8] |= 1 << (row % 8)

    data = network_entries(network)["network/lanes/capacity"]

    assert data[8 * len(network.lanes) :] == bytes(bitmap)


@pytest.mark.parametrize(
    "ids", [[b"a", b"", "ü€".encode()], [b""], [], [b"x" * 256], [b"a"] * 70_000]
)
def test_ids_come_back_from_their_records(ids: list[bytes]) -> None:
    """Also empty ones, long ones, and more than fit into one block."""
    column = np.array(ids, dtype=f"S{max(1, *map(len, ids), 1)}")

    assert text_column(text_bytes(column), len(ids)).tolist() == ids


@pytest.mark.parametrize(
    "data",
    [
        b"",
        b"\x01\0\0\0",
        b"\xff\xff\xff\xffa",
        b"\x01\0\0\0\xc3",
        b"\x01\0\0\0\0",
        b"\x01\0\0\0ab",
        b"\x01\x01\0\0" + b"a" * 257,
    ],
)
def test_one_id_that_is_none_is_refused(data: bytes) -> None:
    """Cut off, endless, not UTF-8, a control character, bytes left over, too long."""
    with pytest.raises(NormalFormError):
        text_column(data, 1)


def test_half_a_character_at_the_seam_of_two_ids_is_refused() -> None:
    """Together they would be UTF-8; each alone is not."""
    with pytest.raises(NormalFormError):
        text_column(b"\x01\0\0\0\xc3" + b"\x01\0\0\0\xbc", 2)


def spoilt_head(**changes: object) -> dict[str, bytes]:
    """Return the entries of a network whose head has other fields."""
    entries = network_entries(network_of_seed(0))
    head = json.loads(entries["network/head.json"]) | changes
    return {**entries, "network/head.json": rfc8785.dumps(head)}


@pytest.mark.parametrize(
    "changes",
    [
        {"format": 2},
        {"format": True},
        {"currency": "eur"},
        {"cut_off": ""},
        {"name": None},
        {"zebra": 1},
        {"extra": {}},
        {"items": {}},
        {"tables": {}},
        {"rules": [{"rule": "zebra", "id": "a"}]},
        {"rules": [{"rule": "closure", "id": "a", "lanes": {}, "sites": {}}]},
        {"rules": [{"rule": "closure", "id": "a", "lanes": {"ids": ["b", "a"]}}]},
        {"rules": [{"rule": "closure", "id": "a", "lanes": {}, "from": "2026-02-30"}]},
    ],
)
def test_head_of_another_shape_is_refused(changes: dict[str, object]) -> None:
    """What is not in the format is no network."""
    with pytest.raises(NormalFormError):
        network_from_entries(spoilt_head(**changes))


def test_spaces_in_the_head_are_refused() -> None:
    """One network, one spelling: else two digests would name the same thing."""
    entries = network_entries(network_of_seed(0))
    entries["network/head.json"] += b" "

    with pytest.raises(NormalFormError):
        network_from_entries(entries)


@pytest.mark.parametrize("table", ["supply", "demand", "lanes"])
def test_rows_out_of_order_are_refused(table: str) -> None:
    """Each table is sorted; rows from last to first are another, wrong file."""
    keys = {"supply": "site", "demand": "reference", "lanes": "origin"}
    refused = 0
    for network in rich_networks():
        rows = getattr(network, table)
        key = getattr(rows, keys[table])
        if key[0] == key[-1]:
            continue
        turned = replace(rows, **{keys[table]: key[::-1]})
        with pytest.raises(NormalFormError):
            network_from_entries(network_entries(replace(network, **{table: turned})))
        refused += 1

    assert refused > 3


def test_damaged_zip_is_refused(tmp_path: Path) -> None:
    """A flipped bit in a column changes its check sum."""
    path = tmp_path / "network.zip"
    write_network(network_of_seed(0), path)
    data = bytearray(path.read_bytes())
    data[len(data) // 3] ^= 1
    path.write_bytes(bytes(data))

    with pytest.raises(NormalFormError):
        read_network(path)


def test_two_kinds_of_handling_at_a_site_are_refused() -> None:
    """A site has one cost for all items, or one by item; both would mean two things."""
    network = network_of_seed(0)
    step = network.items[0].step
    site = replace(
        network.sites[0], handling_cost_any=step, handling_cost={network.items[0].id: step}
    )

    with pytest.raises(NormalFormError):
        network_entries(replace(network, sites=(site, *network.sites[1:])))


def test_zip_depends_on_its_entries_alone() -> None:
    """Order of insertion and clock leave no trace; any zip tool reads it."""
    first = stored_zip({"b": b"2", "a": b"1"})
    second = stored_zip({"a": b"1", "b": b"2"})

    assert first == second
    assert read_stored_zip(first) == ({"a": b"1", "b": b"2"}, ())
