"""Who may serve which order lines of one item, on which days, and how late that is."""

from typing import TYPE_CHECKING

import numpy as np

from service.network.columns import IntArray, Network
from service.network.reach import LaneUse
from service.planning.model.arcs import UNLIMITED, Kind
from service.planning.model.groups import Groups
from service.planning.model.site_days import SiteDays, each_place

if TYPE_CHECKING:
    from service.planning.model.item_arcs import ArcList


def add_serving(arcs: "ArcList", network: Network, item: int, use: LaneUse) -> None:
    """Add who may serve which group, on which days and how late."""
    groups, layout = arcs.groups, arcs.layout
    days = layout.places
    own = np.array(
        [
            allowed is None or int(site) in allowed
            for site, allowed in zip(groups.site, groups.origins, strict=True)
        ],
        np.bool_,
    )
    served = np.flatnonzero(own)
    at, place = each_place(days, groups.site[served])
    group = served[at]
    group, place = _in_time(days, groups, group, place)
    arcs.add_serving(Kind.SERVE, layout.outside[place], group, place)
    node, place, origin = layout.arrivals
    site = days.site[place]
    stock_at = {
        before: frozenset(np.flatnonzero(use.stock_reaching(item, before)).tolist())
        for before in sorted(set(origin[origin >= 0].tolist()))
    }
    arrivals_of: dict[int, list[int]] = {}
    for arrival in np.flatnonzero(layout.apart[site]).tolist():
        arrivals_of.setdefault(int(site[arrival]), []).append(arrival)
    pairs = [
        (arrival, group)
        for group, (where, allowed) in enumerate(
            zip(groups.site.tolist(), groups.origins, strict=True)
        )
        for arrival in arrivals_of.get(where, ())
        if allowed is None or _all_named(stock_at[int(origin[arrival])], allowed)
    ]
    arrived, group = np.array(pairs, np.int64).reshape(len(pairs), 2).T
    group, arrived = _in_time(days, groups, group, arrived, place=place)
    thing = network.items[item]
    arcs.add_serving(
        Kind.SERVE_ARRIVED,
        node[arrived],
        group,
        place[arrived],
        capacity=np.where(layout.closed[site[arrived]], 0, UNLIMITED),
        handling=[
            network.sites[where].handling(thing.id) * thing.step for where in site[arrived].tolist()
        ],
    )


def _in_time(
    days: SiteDays,
    groups: Groups,
    group: IntArray,
    at: IntArray,
    *,
    place: IntArray | None = None,
) -> tuple[IntArray, IntArray]:
    """Return those pairs of a group and a place in whose days the group may be served.

    ``at`` are places, or positions in ``place``.
    """
    if days.day is None:
        return group, at
    day = days.day[at if place is None else place[at]]
    open_ = (groups.earliest[group] <= day) & (day <= groups.latest[group])
    return group[open_], at[open_]


def _all_named(stock: frozenset[int], allowed: frozenset[int]) -> bool:
    """Return whether some stock can come this way and all of it may serve.

    Where only a part is named the intake has refused the line (``origins_behind_cross_dock``).
    """
    return bool(stock) and stock <= allowed
