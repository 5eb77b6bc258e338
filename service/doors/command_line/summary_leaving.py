"""The part of the summary that says what leaves where."""

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import groupby

from service.doors.command_line.layout import (
    Document,
    count_of,
    grouped,
    money_digits,
    table,
    to_digits,
)

SITES_SHOWN = 7


def what_leaves(plan: Document) -> list[str]:
    """Return what leaves each site, the heaviest first."""
    consignments = sorted(plan["consignments"], key=lambda row: str(row["origin"]))
    sites = [
        (site, _Leaving.of(list(rows)))
        for site, rows in groupby(consignments, key=lambda row: str(row["origin"]))
    ]
    if not sites:
        return []
    sites.sort(key=lambda entry: (-(entry[1].weight_kg or 0), -entry[1].cost, entry[0]))
    digits = money_digits(plan)
    columns: list[tuple[str, list[str]]] = [
        ("from", [site for site, _ in sites]),
        ("consignments", [grouped(leaving.number) for _, leaving in sites]),
        ("pallets", [_known(leaving.pallets, Fraction(1)) for _, leaving in sites]),
        ("tonnes", [_known(leaving.weight_kg, Fraction(1, 1000)) for _, leaving in sites]),
        (
            f"transport {plan['currency']}",
            [to_digits(leaving.cost, digits) for _, leaving in sites],
        ),
    ]
    # A column that is unknown throughout says nothing, and vanishes like any empty part.
    columns = [column for column in columns if set(column[1]) != {"unknown"}]
    rows = list(zip(*(values[:SITES_SHOWN] for _, values in columns), strict=True))
    more = len(sites) - len(rows)
    return [
        "",
        "WHAT LEAVES",
        *table([name for name, _ in columns], rows, right=range(1, len(columns))),
        *([f"  and {count_of(more, 'more site')}: --csv consignments lists all"] if more else []),
    ]


@dataclass(frozen=True, slots=True, kw_only=True)
class _Leaving:
    """What leaves one site; a total is None where an item does not say its part."""

    number: int
    pallets: Fraction | None
    weight_kg: Fraction | None
    cost: Fraction

    @staticmethod
    def of(consignments: Sequence[Document]) -> "_Leaving":
        """Add up the consignments of one site."""
        return _Leaving(
            number=len(consignments),
            pallets=_sum(consignments, "pallets"),
            weight_kg=_sum(consignments, "weight_kg"),
            cost=sum((Fraction(row["cost"]) for row in consignments), Fraction(0)),
        )


def _known(value: Fraction | None, scale: Fraction) -> str:
    """Return a scaled total with one decimal, or that it is unknown."""
    return "unknown" if value is None else to_digits(value * scale, 1)


def _sum(rows: Sequence[Document], column: str) -> Fraction | None:
    """Return the exact sum of a column, or None where a row does not know its value."""
    values = [row[column] for row in rows]
    if "unknown" in values:
        return None
    return sum((Fraction(value) for value in values), Fraction(0))
