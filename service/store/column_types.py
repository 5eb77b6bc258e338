"""Column types that mean the same on SQLite and PostgreSQL."""

from datetime import datetime
from typing import Any

from sqlalchemy import Dialect, Text
from sqlalchemy.types import TypeDecorator, TypeEngine

from service.runs.events import moment_of, moment_text

# Compared byte by byte on both databases: a locale's order would differ from machine to machine.
PlainText = Text().with_variant(Text(collation="C"), "postgresql")


class Moment(TypeDecorator[datetime]):
    """A moment in UTC, kept as the text that events hash: six decimals and ``Z``.

    SQLite has no type for it and would drop the zone; the text sorts by time on both databases.
    """

    impl = Text
    cache_ok = True

    def load_dialect_impl(self, dialect: Dialect) -> TypeEngine[Any]:
        """Return the text type of ``dialect`` that compares byte by byte."""
        return dialect.type_descriptor(PlainText)

    def process_bind_param(self, value: datetime | None, dialect: Dialect) -> str | None:
        """Write a moment; one without a zone is refused."""
        del dialect
        return None if value is None else moment_text(value)

    def process_result_value(self, value: str | None, dialect: Dialect) -> datetime | None:
        """Read a moment back, in UTC."""
        del dialect
        return None if value is None else moment_of(value)
