"""The port ``Store`` over a database: transactions, and blobs on their way in and out."""

import hashlib
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import BinaryIO, Final

import structlog
from sqlalchemy import Engine
from sqlalchemy.exc import SQLAlchemyError
from sqlalchemy.orm import Session

from service.network.canonical import digest as digest_of
from service.runs.faults import BlobBroken, StoreUnavailable
from service.runs.ports import Clock
from service.runs.run import RunId, Staged
from service.store.blob_repository import PART_BYTES, SqlBlobRepository, pack
from service.store.database import READ_ONLY, Database
from service.store.migrate import pending_in
from service.store.reaching import reaching
from service.store.transaction import SqlTransaction
from service.store.triggers import trigger_faults
from service.store.warm_start_repository import SqlWarmStartRepository

WARM_START_BYTES_MAX_DEFAULT: Final = 256 * 2**20

_log = structlog.get_logger(__name__)


@dataclass(frozen=True, slots=True, kw_only=True)
class SystemClock:
    """The clock of this machine."""

    def now(self) -> datetime:
        """Return the present moment in UTC."""
        return datetime.now(UTC)


class SqlStore:
    """Everything that is kept, in one database."""

    def __init__(
        self,
        database: Database,
        clock: Clock,
        *,
        warm_start_bytes_max: int = WARM_START_BYTES_MAX_DEFAULT,
    ) -> None:
        """Keep everything in ``database``; the caller closes it.

        Of warm starts at most ``warm_start_bytes_max`` are kept for each tenant, 0 for none.
        """
        self._database = database
        self._clock = clock
        self._warm_start_bytes_max = warm_start_bytes_max
        options: dict[str, object] = {READ_ONLY: True}
        if not database.is_sqlite:
            # One snapshot for the whole reading, as SQLite gives by itself.
            options |= {"isolation_level": "REPEATABLE READ", "postgresql_readonly": True}
        self._reader = database.engine.execution_options(**options)

    @contextmanager
    def transaction(self) -> Iterator[SqlTransaction]:
        """Begin a unit of work: committed when the block ends well, else rolled back."""
        with self._writing() as session:
            yield SqlTransaction(session, self._clock)

    @contextmanager
    def reading(self) -> Iterator[SqlTransaction]:
        """Begin a unit of work that the database itself keeps from writing."""
        with self._session(self._reader) as session:
            yield SqlTransaction(session, self._clock)

    def stage_bytes(self, tenant: str, content: bytes) -> Staged:
        """Take bytes in; only content above one part is written before its transaction."""
        digest = digest_of(content)
        if len(content) <= PART_BYTES:
            return Staged(
                tenant=tenant,
                digest=digest,
                unpacked_bytes=len(content),
                part=pack(content),
            )
        pieces = (
            content[start : start + PART_BYTES] for start in range(0, len(content), PART_BYTES)
        )
        return self._stage_large(tenant, digest, len(content), pieces)

    def stage_file(self, tenant: str, path: Path) -> Staged:
        """Take a file in without ever holding the whole of it."""
        size = path.stat().st_size
        if size <= PART_BYTES:
            return self.stage_bytes(tenant, path.read_bytes())
        with path.open("rb") as file:
            digest = "sha-256:" + hashlib.file_digest(file, "sha256").hexdigest()
            file.seek(0)
            return self._stage_large(tenant, digest, size, _pieces(file))

    def blob(self, tenant: str, digest: str) -> bytes:
        """Return the whole blob; raise ``BlobBroken`` when it is not what its digest says."""
        with self._session(self._reader) as session:
            content = b"".join(SqlBlobRepository(session).parts(tenant, digest))
        if digest_of(content) != digest:
            raise BlobBroken(f"blob {digest} has other content")
        return content

    def blob_to_file(self, tenant: str, digest: str, path: Path) -> None:
        """Write the blob to ``path``; raise ``BlobBroken`` when it is not what it should be."""
        running = hashlib.sha256()
        with self._session(self._reader) as session, path.open("wb") as file:
            for part in SqlBlobRepository(session).parts(tenant, digest):
                running.update(part)
                file.write(part)
        if "sha-256:" + running.hexdigest() != digest:
            raise BlobBroken(f"blob {digest} has other content")

    def warm_start(self, tenant: str, *, network_digest: str, likeness: str | None) -> bytes | None:
        """Return what a run of this network, or like it, may start from; None if nothing."""
        try:
            with self._session(self._reader) as session:
                return SqlWarmStartRepository(session).newest(
                    tenant, network_digest=network_digest, likeness=likeness
                )
        except (StoreUnavailable, SQLAlchemyError) as error:
            _log.warning("warm_start_not_read", error=_name_of(error))
            return None

    def keep_warm_start(self, run_id: RunId, tenant: str, content: bytes) -> None:
        """Keep what a run found out, if it can be kept."""
        try:
            with self._writing() as session:
                SqlWarmStartRepository(session).keep(
                    run_id, tenant, content, bytes_max=self._warm_start_bytes_max
                )
        except (StoreUnavailable, SQLAlchemyError) as error:
            _log.warning("warm_start_not_kept", run_id=run_id, error=_name_of(error))

    def missing(self) -> list[str]:
        """Return what keeps the store from working, in words; empty means ready."""
        try:
            with reaching(), self._database.engine.connect() as connection:
                waiting = pending_in(connection)
                if waiting:
                    return [f"migrations {', '.join(waiting)}: run lanewright migrate"]
                return trigger_faults(connection)
        except StoreUnavailable as error:
            return [f"database: {error}"]

    def _stage_large(
        self,
        tenant: str,
        digest: str,
        size: int,
        pieces: Iterator[bytes],
    ) -> Staged:
        staged = Staged(tenant=tenant, digest=digest, unpacked_bytes=size, part=None)
        with self._session(self._reader) as session:
            if SqlBlobRepository(session).has(tenant, digest):
                return staged
        parts = -(-size // PART_BYTES)
        for part, piece in enumerate(pieces):
            packed = pack(piece)  # before the transaction: others may write meanwhile
            with self._writing() as session:
                SqlBlobRepository(session).add(
                    tenant,
                    digest,
                    part=part,
                    parts=parts,
                    unpacked_bytes=size,
                    packed=packed,
                )
        return staged

    @contextmanager
    def _writing(self) -> Iterator[Session]:
        with self._database.writing, self._session(self._database.engine) as session:
            yield session

    @contextmanager
    def _session(self, engine: Engine) -> Iterator[Session]:
        with (
            reaching(),
            Session(engine, expire_on_commit=False) as session,
            session.begin(),
        ):
            yield session


def _name_of(error: Exception) -> str:
    """Return what happened without the statement and its values, which belong in no log."""
    return type(getattr(error, "orig", None) or error).__name__


def _pieces(file: BinaryIO) -> Iterator[bytes]:
    while piece := file.read(PART_BYTES):
        yield piece
