"""What planned runs leave for the next ones to start from: a cache, bounded and droppable.

Nothing of it is a fact and nothing depends on it. Whatever is damaged is as good as absent.
"""

from typing import Final, cast

import zstandard
from sqlalchemy import ColumnElement, Table, delete, select
from sqlalchemy.dialects import postgresql, sqlite
from sqlalchemy.orm import Session

from service.network.canonical import digest as digest_of
from service.runs.run import RunId
from service.store.blob_repository import pack
from service.store.tables import RunDispatchRow, RunRow, WarmStartRow

# A frame that claims to unpack to more is not ours.
_UNPACKED_BYTES_MAX: Final = 64 * 2**20
_TABLE: Final = cast("Table", WarmStartRow.__table__)


class SqlWarmStartRepository:
    """The newest of each network, the newest of each likeness, within a bound for each tenant."""

    def __init__(self, session: Session) -> None:
        """Work inside the caller's transaction; never commit here."""
        self._session = session

    def newest(self, tenant: str, *, network_digest: str, likeness: str | None) -> bytes | None:
        """Return what the newest run of the network left, else the newest of equal likeness."""
        same = self._newest(tenant, WarmStartRow.network_digest == network_digest)
        if same is not None or likeness is None:
            return same
        return self._newest(tenant, WarmStartRow.likeness == likeness)

    def keep(self, run_id: RunId, tenant: str, content: bytes, *, bytes_max: int) -> None:
        """Keep ``content``; drop what it replaces, and the oldest beyond ``bytes_max``."""
        packed = pack(content)
        if len(packed) > bytes_max:
            return
        network_digest = self._session.scalars(
            select(RunRow.network_digest).where(RunRow.tenant == tenant, RunRow.id == run_id),
        ).one()
        likeness = self._session.scalars(
            select(RunDispatchRow.likeness).where(
                RunDispatchRow.tenant == tenant, RunDispatchRow.run == run_id
            ),
        ).one()
        self._session.execute(
            delete(WarmStartRow).where(
                WarmStartRow.tenant == tenant,
                WarmStartRow.network_digest == network_digest,
            ),
        )
        values = {
            "tenant": tenant,
            "run": run_id,
            "network_digest": network_digest,
            "likeness": likeness,
            "digest": digest_of(content),
            "packed_bytes": len(packed),
            "bytes": packed,
        }
        # The two databases have statements of the same name and no common type for them. A row of
        # this run can only come from a finish that was repeated, and is as good.
        on_sqlite = self._session.get_bind().dialect.name == "sqlite"
        insert = sqlite.insert if on_sqlite else postgresql.insert
        self._session.execute(insert(_TABLE).values(values).on_conflict_do_nothing())
        self._drop_oldest(tenant, bytes_max)

    def _newest(self, tenant: str, like: ColumnElement[bool]) -> bytes | None:
        statement = (
            select(WarmStartRow.packed, WarmStartRow.digest)
            .where(WarmStartRow.tenant == tenant, like)
            .order_by(WarmStartRow.run.desc())
            .limit(1)
        )
        row = self._session.execute(statement).one_or_none()
        return None if row is None else _unpacked(row.packed, row.digest)

    def _drop_oldest(self, tenant: str, bytes_max: int) -> None:
        """Remove the oldest, by run ids, which sort by time, until the rest is within the bound."""
        statement = (
            select(WarmStartRow.run, WarmStartRow.packed_bytes)
            .where(WarmStartRow.tenant == tenant)
            .order_by(WarmStartRow.run.desc())
        )
        total = 0
        for row in self._session.execute(statement).all():
            total += row.packed_bytes
            if total > bytes_max:
                older = delete(WarmStartRow).where(
                    WarmStartRow.tenant == tenant, WarmStartRow.run <= row.run
                )
                self._session.execute(older)
                return


def _unpacked(packed: bytes, digest: str) -> bytes | None:
    """Return the content, or None where it is not what was kept."""
    try:
        if not 0 <= zstandard.frame_content_size(packed) <= _UNPACKED_BYTES_MAX:
            return None
        content = zstandard.ZstdDecompressor().decompress(packed)
    except (zstandard.ZstdError, TypeError):
        # SQLite would also hand out a text or a number where somebody wrote one.
        return None
    return content if digest_of(content) == digest else None
