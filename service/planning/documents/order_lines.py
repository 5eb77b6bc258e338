"""Who gets what from where: the paths of an item shared out to its order lines."""

from collections.abc import Iterable
from datetime import datetime
from typing import NamedTuple

import numpy as np

from service.network.columns import Network
from service.planning.documents.paths import Path
from service.planning.model.groups import Groups


class Share(NamedTuple):
    """``steps`` of one path that go to one order line."""

    path: Path
    steps: int


def shares_of(
    network: Network, groups: Groups, paths: Iterable[Path], *, names: dict[int, bytes]
) -> dict[int, list[Share]]:
    """Return the shares of each order line, by its row in the network's demand.

    Within a group, sources (by arrival, origin, lanes, row) and lines (by time of order, reference)
    are walked side by side: at most one line for each source but the last is split, a line that
    equals what is left of a source takes it whole, and what is short falls on the last lines.
    ``names`` are those of the lanes in use, by position in ``LaneBounds.rows``.
    """
    waiting: dict[int, list[Path]] = {}
    for path in paths:
        waiting.setdefault(path.group, []).append(path)
    shares: dict[int, list[Share]] = {}
    for group, lines in _lines(network, groups).items():
        sources = waiting.get(group, [])
        if len(sources) > 1:
            sources.sort(
                key=lambda path: (
                    path.arrives,
                    path.site,
                    [names[leg] for leg in path.legs],
                    path.legs,
                    path.row,
                )
            )
        at, left = 0, sources[0].steps if sources else 0
        for row, wanted in lines:
            missing = wanted
            own = shares.setdefault(row, [])
            while missing and at < len(sources):
                steps = min(missing, left)
                own.append(Share(sources[at], steps))
                missing -= steps
                left -= steps
                if not left:
                    at += 1
                    left = sources[at].steps if at < len(sources) else 0
    return shares


def _lines(network: Network, groups: Groups) -> dict[int, list[tuple[int, int]]]:
    """Return (row, wanted steps) of each group's order lines, first come first."""
    ordered_at = network.demand.ordered_at
    # Code -1, no time of order, finds the last rank and comes last; rows are in the order of their
    # references, which the stable sort keeps among equals.
    rank = np.append(np.zeros(len(ordered_at.values), np.int64), len(ordered_at.values))
    by_instant = sorted(
        range(len(ordered_at.values)), key=lambda code: _instant(ordered_at.values[code])
    )
    rank[by_instant] = np.arange(len(by_instant))
    order = np.argsort(rank[ordered_at.codes[groups.rows]], kind="stable")
    lines: dict[int, list[tuple[int, int]]] = {}
    for row, group, steps in zip(
        groups.rows[order].tolist(),
        groups.row_group[order].tolist(),
        groups.row_steps[order].tolist(),
        strict=True,
    ):
        if group >= 0:
            lines.setdefault(group, []).append((row, steps))
    return lines


def _instant(text: str) -> tuple[int, float, str]:
    """Return a key that sorts RFC 3339 times by instant, and equal ones by their text."""
    # Seconds since 1970 with microseconds fit a float exactly until the year 2255.
    return 0, datetime.fromisoformat(text.upper()).timestamp(), text
