"""Points in time (RFC 3339) and calendar dates, as a network states them.

An offset is mandatory. A leap second (``:60``) is refused by name: no calendar of a planner holds
one, and reading it as the next second would move a cut-off to another date. More than nine decimals
of a second are refused too, since nothing finer is ever kept.
"""

import re
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta

_INSTANT = re.compile(
    r"(\d{4}-\d{2}-\d{2})[Tt](\d{2}):(\d{2}):(\d{2})(?:\.(\d+))?([Zz]|[+-]\d{2}:\d{2})", re.ASCII
)
_DATE = re.compile(r"\d{4}-\d{2}-\d{2}", re.ASCII)
_NANOSECONDS = 10**9
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)

INSTANT_ADVICE = "Write a time with its offset, such as 2026-02-03T16:00:00+01:00 (RFC 3339)."
DATE_ADVICE = "Write a date such as 2026-02-03."


@dataclass(frozen=True, slots=True, kw_only=True)
class Instant:
    """A point in time: ``nanoseconds`` since 1970 in UTC, and its two spellings.

    ``local`` keeps the offset as sent (``+00:00`` becomes ``Z``), so that its first ten characters
    are the local date; ``utc`` is the same instant in UTC. Idle zeros of the fraction are dropped.
    """

    nanoseconds: int
    local: str
    utc: str

    @property
    def local_date(self) -> date:
        """Return the calendar date where the offset holds."""
        return date.fromisoformat(self.local[:10])


def read_instant(text: str) -> Instant:
    """Read an RFC 3339 date and time; raise ``ValueError`` with advice for anything else."""
    match = _INSTANT.fullmatch(text)
    if match is None:
        raise ValueError(INSTANT_ADVICE)
    day, hour, minute, second, fraction, offset = match.groups()
    if second == "60":
        raise ValueError("A leap second cannot be planned with. Write the second before or after.")
    decimals = (fraction or "").rstrip("0")
    if len(decimals) > 9:
        raise ValueError("At most nine decimals of a second.")
    behind = offset[0] == "-"
    offset = "Z" if offset in ("z", "Z", "+00:00", "-00:00") else offset
    hours, minutes = (0, 0) if offset == "Z" else (int(offset[1:3]), int(offset[4:6]))
    if hours > 23 or minutes > 59:
        raise ValueError(INSTANT_ADVICE)
    away = timedelta(hours=hours, minutes=minutes)
    try:
        wall = datetime.fromisoformat(f"{day}T{hour}:{minute}:{second}+00:00")
        moment = wall + away if behind else wall - away
    except (ValueError, OverflowError):
        raise ValueError(INSTANT_ADVICE) from None
    tail = f".{decimals}" if decimals else ""
    whole = (moment - _EPOCH) // timedelta(seconds=1)
    return Instant(
        nanoseconds=whole * _NANOSECONDS + int(decimals.ljust(9, "0")),
        local=f"{day}T{hour}:{minute}:{second}{tail}{offset}",
        utc=f"{moment.replace(tzinfo=None).isoformat(timespec='seconds')}{tail}Z",
    )


def read_date(text: str) -> date:
    """Read a calendar date; raise ``ValueError`` with advice for anything else."""
    if _DATE.fullmatch(text):
        try:
            return date.fromisoformat(text)
        except ValueError:
            pass
    raise ValueError(DATE_ADVICE)
