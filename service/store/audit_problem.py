"""What an audit finds."""

from collections.abc import Iterator
from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class Problem:
    """One thing that does not agree: a stable ``code``, the ``place``, and what is wrong there."""

    code: str
    place: str
    detail: str

    def to_document(self) -> dict[str, str]:
        """Return the problem as plain JSON."""
        return {"code": self.code, "place": self.place, "detail": self.detail}


def guarded(problems: Iterator[Problem], *, code: str, place: str) -> Iterator[Problem]:
    """Yield ``problems``; a row that cannot even be read is one more, at ``place``.

    SQLite keeps text in a column of numbers if it is told to, and a moment may have become any
    text at all.
    """
    try:
        yield from problems
    except (ValueError, TypeError, LookupError) as error:
        yield Problem(code=code, place=place, detail=f"a row cannot be read: {error}")
