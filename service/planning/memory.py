"""How much memory planning takes, estimated from counts before it starts.

The estimate is a sum of counts with weights that were fitted to measured peaks, so that no measured
one lies above it. It is of the address space of a planning child, which is what its limit counts.
"""

from collections.abc import Mapping
from typing import Final

# Bytes for each. Measured on 2026-12-01 on a grid of shapes up to a million lanes, fitted from
# above, 5 % added (tests/engine/memory_grid.py; Linux, Python 3.11, NumPy 2.4, OR-Tools 9.15).
WEIGHTS: Final[Mapping[str, int]] = {
    "base": 331_000_000,
    "lanes": 43,
    "usable_lanes": 36,
    "usable_lanes_of_one": 49,
    "places": 6_400,
    "order_lines": 6_400,
    "supply_rows": 500,
    "items": 86_000,
    "file_bytes": 3,
    # Measured on 30 sites, 800 places and 5 items that share limits: 1.0 kB for each of 120,000.
    "sharing_lanes": 1_500,
}
"""Weights of ``network/workload.py``'s counts; ``base`` is a child that has loaded the solver."""

# What the grid does not show: other shapes, other versions of the libraries.
_ROOM: Final = 1.5


def features(workload: Mapping[str, int]) -> list[int]:
    """Return what the weights stand for, in their order; ``workload`` as the intake counts it."""
    # Workloads that were counted before items could share limits say nothing of it.
    return [1 if name == "base" else workload.get(name, 0) for name in WEIGHTS]


def estimated_peak_bytes(workload: Mapping[str, int]) -> int:
    """Return the address space that planning comes to at most, as far as counts can tell."""
    pairs = zip(WEIGHTS.values(), features(workload), strict=True)
    return sum(weight * count for weight, count in pairs)


def limit_bytes(estimated: int | None, *, allowed: int, held: int) -> int:
    """Return the limit for a child that already ``held`` so much address space.

    It is the estimate with room, at most what is ``allowed``: a run that goes astray is ended long
    before it takes all of that. A child that was used before has kept some of what it got.
    """
    if estimated is None:
        return allowed
    return min(allowed, int(_ROOM * estimated) + max(0, held - WEIGHTS["base"]))
