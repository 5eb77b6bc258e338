"""Columns of exact numbers: whole numbers over one denominator.

A fraction for every cell of a plan would take most of the time of a check.
"""

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction


@dataclass(frozen=True, slots=True, kw_only=True)
class Numbers:
    """The numbers ``whole[i] / below``; ``below`` is above 0."""

    whole: list[int]
    below: int

    def over(self, below: int) -> list[int]:
        """Return the numerators over another denominator, a multiple of this one."""
        factor = below // self.below
        return self.whole if factor == 1 else [number * factor for number in self.whole]

    def in_steps(self, step: Fraction) -> list[int | None]:
        """Return each number in steps, None where it is no whole number of them above 0."""
        above, below = step.denominator, self.below * step.numerator
        return [
            number * above // below if number > 0 and number * above % below == 0 else None
            for number in self.whole
        ]


def numbers(texts: Sequence[str]) -> Numbers:
    """Return the values of texts of the shape ``is_amount``."""
    together = "".join(texts)
    if "/" in together:
        return numbers_of(Fraction(text) for text in texts)
    if "." not in together:
        return Numbers(whole=list(map(int, texts)), below=1)
    places = max(len(text.partition(".")[2]) for text in texts)
    below = 10**places
    whole = []
    for text in texts:
        units, _, decimals = text.partition(".")
        whole.append(int(units + decimals.ljust(places, "0")))
    return Numbers(whole=whole, below=below)


def numbers_of(fractions: Iterable[Fraction]) -> Numbers:
    """Return fractions as a column."""
    values = list(fractions)
    below = math.lcm(1, *{value.denominator for value in values})
    return Numbers(
        whole=[value.numerator * (below // value.denominator) for value in values], below=below
    )


def together(*columns: Numbers) -> tuple[list[list[int]], int]:
    """Return the numerators of columns over their common denominator, and that."""
    below = math.lcm(1, *(column.below for column in columns))
    return [column.over(below) for column in columns], below
