"""From columns to the formal network of each item, and the method that represents them exactly."""

from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components

from service.network.columns import Network
from service.network.days import is_dated, movements_of
from service.network.options import Options
from service.network.reach import LaneUse
from service.network.tariffs import tariffs_of
from service.planning.model.item_arcs import item_arcs
from service.planning.model.item_network import ItemNetwork
from service.planning.model.limit_rows import shared_limits
from service.planning.model.rule_book import RuleBook, rule_book
from service.planning.model.scaling import cost_scale
from service.planning.model.shared_limits import SharedLimits

PURE_NETWORK = "min_cost_flow"
LINEAR_PROGRAM = "linear_program"


@dataclass(frozen=True, slots=True, kw_only=True)
class Compiled:
    """A network ready to solve: one formal network an item, and the scale of all their money.

    ``shared`` are the limits that items share, None where there is none; ``circles`` the items that
    share some, directly or through others, as positions in ``items``.
    """

    network: Network
    options: Options
    use: LaneUse
    book: RuleBook
    items: tuple[ItemNetwork, ...]
    cost_scale: Fraction
    shared: SharedLimits | None
    circles: tuple[tuple[int, ...], ...]
    method: str
    method_reasons: tuple[str, ...]


def compile_network(network: Network, options: Options) -> Compiled:
    """Return the formal networks of all items, and the limits that they share.

    Raises ``NumbersTooLargeError`` where a quantity in steps reaches 2**62.
    """
    use, book = LaneUse(network), rule_book(network)
    movements = movements_of(network) if is_dated(network) else None
    raw = [
        item_arcs(network, options, item, use=use, book=book, movements=movements)
        for item in range(len(network.items))
    ]
    grids = [own.grid() for own in raw]
    # What is charged on a lane is shown by itself, so that it must be whole by itself.
    grids += [own.lanes.charges.grid() for own in raw if own.lanes.charges is not None]
    scale = cost_scale(grids)
    items = tuple(own.finish(scale) for own in raw)
    # With dates or tariffs limits are of one item: the intake refuses others.
    alone = any(own.lanes.departs is not None for own in items) or tariffs_of(network.head)
    shared = None if alone else shared_limits(network, items, book)
    return Compiled(
        network=network,
        options=options,
        use=use,
        book=book,
        items=items,
        cost_scale=scale,
        shared=shared,
        circles=() if shared is None else _circles(shared),
        method=PURE_NETWORK if shared is None else LINEAR_PROGRAM,
        method_reasons=() if shared is None else _reasons(shared),
    )


def _circles(shared: SharedLimits) -> tuple[tuple[int, ...], ...]:
    """Return the items that share limits, in circles that share none with each other."""
    touched = shared.touched()
    graph = csr_array(touched.astype(np.int32))
    _, circle = connected_components(graph @ graph.T, directed=False)
    found: dict[int, list[int]] = {}
    for item in np.flatnonzero(touched.any(axis=1)).tolist():
        found.setdefault(int(circle[item]), []).append(item)
    return tuple(tuple(items) for items in found.values())


def _reasons(shared: SharedLimits) -> tuple[str, ...]:
    """Return what needs the linear program, a sentence for each rule and one for lanes."""
    counts: dict[tuple[str | None, str, str], int] = {}
    for name, kind, measure in zip(shared.names, shared.kinds, shared.measures, strict=True):
        key = name.rule, kind, measure
        counts[key] = counts.get(key, 0) + 1
    found = []
    for (rule, kind, measure), count in counts.items():
        limits = "1 limit" if count == 1 else f"{count} limits"
        who = "Lanes for all items together" if rule is None else f"Rule {rule} ({kind})"
        found.append(f"{who}: {limits} in {measure} over several items, lanes or stocks.")
    return tuple(found)
