"""How numbers and tables look to a person on the command line."""

from collections.abc import Collection, Mapping, Sequence
from fractions import Fraction
from typing import Any

# The plan document as parsed JSON: the one place where Any is what it is.
Document = Mapping[str, Any]

WIDTH = 100
_CELL_MAX = 40


def grouped(value: str | int | Fraction, *, digits: int = 3) -> str:
    """Return a number in groups of three, with at most ``digits`` decimals.

    A value with more is rounded and marked with ``~``: the exact one is in the plan.
    """
    exact = Fraction(value)
    rounded = _rounded(exact, digits)
    whole, _, decimals = _plain(abs(rounded), digits).partition(".")
    whole = f"{int(whole):,}".replace(",", " ")
    sign = "-" if rounded < 0 else ""
    mark = "" if rounded == exact else "~"
    decimals = decimals.rstrip("0")
    return f"{mark}{sign}{whole}{'.' if decimals else ''}{decimals}"


def to_digits(value: str | Fraction, digits: int) -> str:
    """Return a number in groups of three, always with ``digits`` decimals, such as money."""
    rounded = _rounded(Fraction(value), digits)
    whole, _, decimals = _plain(abs(rounded), digits).partition(".")
    whole = f"{int(whole):,}".replace(",", " ")
    return f"{'-' if rounded < 0 else ''}{whole}{'.' if decimals else ''}{decimals}"


def money_digits(plan: Document) -> int:
    """Return how many decimals the currency has, which the rounded total shows."""
    return len(str(plan["total_cost_rounded"]).partition(".")[2])


def percent(part: Fraction, whole: Fraction) -> str:
    """Return ``part`` of ``whole`` in percent, rounded down: all but one is never 100 %."""
    tenths = part * 1000 // whole
    return f"{tenths // 10}.{tenths % 10} %"


def count_of(number: int, noun: str) -> str:
    """Return a number with its noun: 1 line, 2 lines."""
    return f"{grouped(number)} {noun}{'' if number == 1 else 's'}"


def mebibytes(size: int) -> str:
    """Return a number of bytes in MiB, rounded up."""
    return f"{grouped(-(-size // 2**20))} MiB"


def clipped(text: str, width: int = WIDTH) -> str:
    """Return ``text``, cut at ``width`` with an ellipsis that says so."""
    return text if len(text) <= width else text[: width - 1] + "…"


def table(
    header: Sequence[str], rows: Sequence[Sequence[str]], *, right: Collection[int]
) -> list[str]:
    """Return a table as lines, columns in ``right`` set flush right."""
    cells = [[clipped(cell, _CELL_MAX) for cell in row[:-1]] + [row[-1]] for row in rows]
    widths = [max(len(row[column]) for row in [header, *cells]) for column in range(len(header))]
    return [
        clipped(
            "  "
            + "  ".join(
                cell.rjust(width) if column in right else cell.ljust(width)
                for column, (cell, width) in enumerate(zip(row, widths, strict=True))
            ).rstrip()
        )
        for row in [header, *cells]
    ]


def _rounded(value: Fraction, digits: int) -> Fraction:
    """Return ``value`` rounded half away from zero, as the plan rounds its total."""
    steps = (abs(value) * 10**digits + Fraction(1, 2)) // 1
    return Fraction(steps, 10**digits) * (-1 if value < 0 else 1)


def _plain(value: Fraction, digits: int) -> str:
    """Return a value that ``digits`` decimals hold exactly, with all of them."""
    scaled = int(value * 10**digits)
    text = str(scaled).rjust(digits + 1, "0")
    return f"{text[:-digits]}.{text[-digits:]}" if digits else text
