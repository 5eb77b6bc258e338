"""The options of a run: query parameters at one door, options of the same name at another."""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import date
from fractions import Fraction
from typing import Final, Literal

from service.network.faults import Fault, value_text
from service.network.not_yet import NOT_YET_OPTIONS, refusal
from service.network.quantities import (
    RATE_DECIMALS_MAX,
    NumberFaultError,
    exact_text,
    read_decimal,
)

DEADLINE_SECONDS_MAX = 900
DEADLINE_SECONDS_DEFAULT = 60
LABEL_CHARACTERS_MAX = 200
# Ten years: far beyond any stock that is worth planning with, and far from any overflow.
AGE_MINUTES_MAX = 10 * 366 * 24 * 60

_WHOLE = re.compile(r"0|[1-9][0-9]{0,8}")
_DATE = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}")
# C0 and C1 controls, and half surrogate pairs, which UTF-8 cannot carry.
_UNPRINTABLE = re.compile("[\x00-\x1f\x7f-\x9f\ud800-\udfff]")


@dataclass(frozen=True, slots=True, kw_only=True)
class Options:
    """How a run is planned. ``worth_at_most`` is money per item unit; None means not set.

    ``plan_for`` is the local date of the cut-off where it is None.
    """

    shortages: Literal["allow", "forbid"] = "allow"
    worth_at_most: Fraction | None = None
    demand_rounding: Literal["refuse", "up", "down"] = "refuse"
    bad_rows: Literal["refuse", "set_aside"] = "refuse"
    label: str | None = None
    plan_for: date | None = None
    deadline_seconds: int = DEADLINE_SECONDS_DEFAULT
    maximum_age_minutes: int | None = None

    def to_document(self) -> dict[str, object]:
        """Return every effective value as plain JSON, decimals and dates as text."""
        return {
            "shortages": self.shortages,
            "worth_at_most": None if self.worth_at_most is None else exact_text(self.worth_at_most),
            "demand_rounding": self.demand_rounding,
            "bad_rows": self.bad_rows,
            "label": self.label,
            "plan_for": None if self.plan_for is None else self.plan_for.isoformat(),
            "deadline_seconds": self.deadline_seconds,
            "maximum_age_minutes": self.maximum_age_minutes,
        }

    @staticmethod
    def from_document(document: Mapping[str, object]) -> "Options":
        """Read back what ``to_document`` wrote; raise ``ValueError`` for anything else."""
        texts = {name: str(value) for name, value in document.items() if value is not None}
        options, faults = read_options(texts)
        if options is None or options.to_document() != dict(document):
            raise ValueError(f"not a document of options: {faults[:1]}")
        return options


def read_options(texts: Mapping[str, str]) -> tuple[Options | None, tuple[Fault, ...]]:
    """Read options from their texts; exactly one of both results is empty.

    Faults point to ``?name``. An option that is not known, or not built yet, is a fault: none is
    ever ignored.
    """
    values: dict[str, object] = {}
    faults: list[Fault] = []
    for name, text in texts.items():
        place = f"?{name}"
        if name in NOT_YET_OPTIONS:
            code, detail = "not_yet", refusal(name, NOT_YET_OPTIONS[name])
        elif name not in _READERS:
            code = "unknown_option"
            detail = f"There is no such option. The options are: {', '.join(_READERS)}."
        else:
            try:
                values[name] = _READERS[name](text)
                continue
            except NumberFaultError as error:
                code, detail = error.code, error.detail
            except ValueError as error:
                code, detail = "bad_option", str(error)
        shown = value_text(place) or "?"
        faults.append(Fault(pointer=shown, code=code, detail=detail, value=value_text(text)))
    if faults:
        return None, tuple(faults)
    return Options(**values), ()  # type: ignore[arg-type] # each reader returns its field's type


def _choice(*choices: str) -> Callable[[str], str]:
    """Return a reader that accepts one of ``choices``."""

    def read(text: str) -> str:
        if text not in choices:
            raise ValueError(f"Say one of: {', '.join(choices)}.")
        return text

    return read


def _whole(least: int, most: int) -> Callable[[str], int]:
    """Return a reader of whole numbers from ``least`` to ``most``."""

    def read(text: str) -> int:
        if not _WHOLE.fullmatch(text) or not least <= int(text) <= most:
            raise ValueError(f"Say a whole number from {least} to {most}.")
        return int(text)

    return read


def _money(text: str) -> Fraction:
    """Read an amount of money that is not negative."""
    amount = read_decimal(text, decimals_max=RATE_DECIMALS_MAX)
    if amount < 0:
        raise ValueError("Say an amount of money that is not negative.")
    return amount


def _label(text: str) -> str:
    """Read a free text for people."""
    if not 1 <= len(text) <= LABEL_CHARACTERS_MAX or _UNPRINTABLE.search(text):
        raise ValueError(f"Say 1 to {LABEL_CHARACTERS_MAX} characters, no control characters.")
    return text


def _date(text: str) -> date:
    """Read a calendar date."""
    try:
        if _DATE.fullmatch(text):
            return date.fromisoformat(text)
    except ValueError:
        pass
    raise ValueError("Say a date such as 2026-02-03.")


_READERS: Final[Mapping[str, Callable[[str], object]]] = {
    "shortages": _choice("allow", "forbid"),
    "worth_at_most": _money,
    "demand_rounding": _choice("refuse", "up", "down"),
    "bad_rows": _choice("refuse", "set_aside"),
    "label": _label,
    "plan_for": _date,
    "deadline_seconds": _whole(1, DEADLINE_SECONDS_MAX),
    "maximum_age_minutes": _whole(0, AGE_MINUTES_MAX),
}
