"""Blobs: whole and true, or refused; large ones in parts; each tenant's its own."""

import os
from pathlib import Path

import pytest
from sqlalchemy import text

from service.runs.faults import BlobBroken
from service.store.blob_repository import PART_BYTES, pack, unpack
from service.store.database import Database
from service.store.sql_store import SqlStore
from tests.run_factories import sha256


def rows(database: Database) -> list[tuple[str, int, int]]:
    """Return (tenant, part, parts) of everything stored."""
    with database.engine.connect() as connection:
        found = connection.execute(
            text("SELECT tenant, part, parts FROM blob ORDER BY 1, digest, 2")
        )
        return [(row.tenant, row.part, row.parts) for row in found]


def keep(store: SqlStore, content: bytes, *, tenant: str = "local") -> str:
    """Store ``content`` as a use case does; return its digest."""
    staged = store.stage_bytes(tenant, content)
    with store.transaction() as transaction:
        transaction.add_blob(staged)
    return staged.digest


@pytest.mark.parametrize(
    ("size", "parts"),
    [(0, 1), (1, 1), (PART_BYTES, 1), (PART_BYTES + 1, 2), (2 * PART_BYTES, 2), (9_000_000, 3)],
)
def test_content_comes_back_as_it_went_in(
    store: SqlStore,
    database: Database,
    tmp_path: Path,
    size: int,
    parts: int,
) -> None:
    """From memory and from a file, to memory and to a file, also at the edges of a part."""
    content = os.urandom(size)
    file = tmp_path / "content"
    file.write_bytes(content)
    copy = tmp_path / "copy"

    digest = keep(store, content)
    from_file = store.stage_file("local", file)
    store.blob_to_file("local", digest, copy)

    assert digest == from_file.digest == sha256(content)
    assert store.blob("local", digest) == content == copy.read_bytes()
    assert rows(database) == [("local", part, parts) for part in range(parts)]


def test_equal_content_is_kept_once_for_each_tenant(store: SqlStore, database: Database) -> None:
    """Tenants share nothing, not even the knowledge that another has the same."""
    for tenant in ("local", "local", "other"):
        keep(store, b"the same", tenant=tenant)

    assert rows(database) == [("local", 0, 1), ("other", 0, 1)]


def test_large_content_is_written_before_anything_refers_to_it(
    store: SqlStore,
    database: Database,
) -> None:
    """Part by part, a short transaction each: nobody waits long for the turn to write."""
    content = os.urandom(PART_BYTES + 1)

    staged = store.stage_bytes("local", content)

    assert staged.part is None
    assert len(rows(database)) == 2


def test_blob_left_half_written_is_completed(store: SqlStore, database: Database) -> None:
    """A killed process may leave one behind; the next with the same content mends it."""
    content = os.urandom(PART_BYTES + 1)
    values = {"d": sha256(content), "b": pack(content[:PART_BYTES]), "n": len(content)}
    with database.engine.begin() as connection:
        connection.execute(
            text("INSERT INTO blob VALUES ('local', :d, 0, 2, :n, :b)"),
            values,
        )
    with pytest.raises(BlobBroken, match="part 1 is missing"):
        store.blob("local", sha256(content))

    digest = keep(store, content)

    assert store.blob("local", digest) == content


def test_other_content_under_a_digest_is_refused(
    store: SqlStore,
    database: Database,
    tmp_path: Path,
) -> None:
    """Whoever reads a blob reads what was digested, or nothing."""
    digest = sha256(b"what was meant")
    with database.engine.begin() as connection:
        connection.execute(
            text("INSERT INTO blob VALUES ('local', :d, 0, 1, 5, :b)"),
            {"d": digest, "b": pack(b"other")},
        )

    with pytest.raises(BlobBroken, match="other content"):
        store.blob("local", digest)
    with pytest.raises(BlobBroken, match="other content"):
        store.blob_to_file("local", digest, tmp_path / "copy")


@pytest.mark.parametrize(
    "packed",
    [b"", b"no frame at all", pack(b"cut off")[:-3], pack(bytes(PART_BYTES + 1))],
    ids=["empty", "no frame", "cut off", "larger than parts are"],
)
def test_part_that_is_no_part_is_refused(packed: bytes) -> None:
    """Also one that would unpack to more than a part: it may have been made to fill the memory."""
    with pytest.raises(BlobBroken):
        unpack(packed)


def test_unknown_blob_is_refused(store: SqlStore) -> None:
    """Empty content has a digest too, so that nothing at all is not the same as empty."""
    with pytest.raises(BlobBroken):
        store.blob("local", sha256(b""))
