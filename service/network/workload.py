"""How much work a network is, in counts that are cheap to take, and which networks are alike.

Both are taken by the input check and travel with its summary; neither changes a plan.
"""

from dataclasses import asdict, dataclass

import numpy as np

from service.network.canonical import canonical_json, digest
from service.network.columns import CodeArray, IntArray, Network
from service.network.days import is_dated, movements_of
from service.network.rules import SharedCapacity, Throughput, rules_of
from service.network.tariffs import tariffs_of


@dataclass(frozen=True, slots=True, kw_only=True)
class Workload:
    """Counts from which the memory of planning is estimated.

    ``usable_lanes`` bounds from above the pairs of a lane and an item that can use it, and
    ``usable_lanes_of_one`` those of the item that has most; ``places`` bounds the pairs of a site
    and an item that meet there. ``sharing_lanes`` are the pairs of a lane and an item where items
    may share limits, else 0. ``file_bytes`` is the size of the normal form.
    """

    items: int
    sites: int
    supply_rows: int
    order_lines: int
    lanes: int
    usable_lanes: int
    usable_lanes_of_one: int
    places: int
    file_bytes: int
    sharing_lanes: int = 0

    def to_document(self) -> dict[str, int]:
        """Return the counts as a JSON object."""
        return asdict(self)


def workload_of(network: Network, *, file_bytes: int) -> Workload:
    """Return how much work ``network`` is."""
    usable, touched = _usable_lanes(network)
    lanes = len(network.lanes)
    # A lane is as many as it has days of departure, and a site as many as it has days.
    times = 1
    if lanes and is_dated(network):
        times = -(-len(movements_of(network).row) // lanes)
        usable, touched = usable * times, touched * times
    if network.lanes.tariff.values:
        # It is also as many as its steps have prices: at most two for each break but the first.
        # Twice that was measured (300,000 lanes of two breaks: 430 bytes a lane more than without).
        usable = usable * (2 * -(-_prices(network) // lanes) - 1)
    return Workload(
        items=len(network.items),
        sites=len(network.sites),
        supply_rows=len(network.supply),
        order_lines=len(network.demand),
        lanes=lanes * times,
        usable_lanes=int(usable.sum()),
        usable_lanes_of_one=int(usable.max(initial=0)),
        places=int(np.minimum(touched + 2 * usable, times * len(network.sites)).sum()),
        file_bytes=file_bytes,
        sharing_lanes=int(usable.sum()) if _may_share(network) else 0,
    )


def _may_share(network: Network) -> bool:
    """Return whether items may share a limit, of lanes or of a rule."""
    several = len(network.items) > 1
    return "together" in network.lanes.per.values or any(
        isinstance(rule, SharedCapacity)
        or (isinstance(rule, Throughput) and rule.per == "together")
        or (isinstance(rule, Throughput) and several and not rule.items)
        for rule in rules_of(network)
    )


def _prices(network: Network) -> int:
    """Return the number of lanes, those with a tariff counted once for each price of a step."""
    most: dict[str, int] = {}
    for tariff in tariffs_of(network.head):
        most[tariff.id] = max(most.get(tariff.id, 1), 2 * len(tariff.breaks) - 1)
    of_code = np.array([*(most[name] for name in network.lanes.tariff.values), 1], np.int64)
    return int(of_code[network.lanes.tariff.codes].sum())


def likeness_of(network: Network) -> str:
    """Return a digest that networks share whose warehouses, items and currency are the same."""
    kin: dict[str, object] = {
        "currency": network.head["currency"],
        "items": [[item.id, item.unit, str(item.step)] for item in network.items],
        "warehouses": [site.id for site in network.sites if "warehouse" in site.roles],
    }
    return digest(canonical_json(kin))


def _usable_lanes(network: Network) -> tuple[IntArray, IntArray]:
    """Return, by item, a bound on the lanes it can use and the sites that have it or want it.

    A lane of any item is counted for an item that may leave from its origin or arrive at its
    destination: at a cross-dock, where there is stock, or where something is wanted.
    """
    lanes, sites, items = network.lanes, len(network.sites), len(network.items)
    of_any = lanes.item < 0
    own = np.bincount(lanes.item[~of_any], minlength=items).astype(np.int64)
    leaving = np.bincount(lanes.origin[of_any], minlength=sites)
    arriving = np.bincount(lanes.destination[of_any], minlength=sites)
    hub = np.array(["cross_dock" in site.roles for site in network.sites], np.bool_)
    supply = _pairs(network.supply.site, network.supply.item, sites)
    demand = _pairs(network.demand.site, network.demand.item, sites)
    # A lane of one item that must ship also brings its ends into play; those are in ``own``.
    bounds = []
    for pairs, lanes_at in ((supply, leaving), (demand, arriving)):
        site, item = pairs % sites, pairs // sites
        beside = ~hub[site]
        weights = lanes_at[site[beside]].astype(np.float64)
        at_ends = np.bincount(item[beside], weights=weights, minlength=items)
        bounds.append(at_ends.astype(np.int64) + int(lanes_at[hub].sum()))
    any_of = np.minimum(np.minimum(*bounds), int(of_any.sum()))
    forced = np.bincount(lanes.item[~of_any & lanes.must_ship.present], minlength=items) > 0
    # A forced lane may want goods at a site that has neither stock nor orders: no bound but all.
    usable = own + np.where(forced, int(of_any.sum()), any_of)
    touched = np.bincount(supply // sites, minlength=items) + np.bincount(
        demand // sites, minlength=items
    )
    return usable, touched


def _pairs(site: CodeArray, item: CodeArray, sites: int) -> IntArray:
    """Return the distinct pairs of site and item as ``item * sites + site``."""
    pairs: IntArray = np.sort(item.astype(np.int64) * sites + site)
    distinct: IntArray = pairs[np.diff(pairs, prepend=-1) != 0]
    return distinct
