"""Which nodes the sites of one item need, and where lanes begin and end (contract of proof/arcs).

A site is *apart* where its own stock and what arrives must not mix: because what arrives may not
leave again, or because an order line says whose stock may serve it. Otherwise it is *joined*.
"""

from dataclasses import dataclass

import numpy as np

from service.network.columns import BoolArray, CodeArray, IntArray, Network
from service.network.rules import Closure, Throughput
from service.network.units import per_unit
from service.planning.arcs import SIDES, UNLIMITED, Nodes, Side
from service.planning.bounds import LaneBounds
from service.planning.groups import Groups
from service.planning.rule_book import RuleBook
from service.planning.scaling import Rationals
from service.planning.stock import Stock

FLOWS = ("received", "sent", "through")


@dataclass(frozen=True, slots=True, kw_only=True)
class Layout:
    """Nodes of one item, and for each site of the network where things attach (-1: nowhere).

    ``inside``, ``outside`` and ``sent`` are node positions of shape (sites,); ``sent`` is where
    lanes leave from. ``limit`` holds, for each throughput flow, the least limit in steps by site
    (``UNLIMITED``: none). ``arrivals`` lists received nodes as (node, site, origin site or -1).
    """

    nodes: Nodes
    relevant: IntArray
    apart: BoolArray
    by_origin: BoolArray
    closed: BoolArray
    passes_on: BoolArray
    limit: dict[str, IntArray]
    inside: IntArray
    outside: IntArray
    sent: IntArray
    demand: IntArray
    stock: IntArray
    keep: IntArray
    arrivals: tuple[IntArray, CodeArray, CodeArray]

    def lane_ends(self, origin: CodeArray, destination: CodeArray) -> tuple[CodeArray, CodeArray]:
        """Return the nodes that lanes between some sites leave and enter."""
        sites = self.by_origin.shape[0]
        leaves = np.where(self.sent >= 0, self.sent, self.outside).astype(np.int32)
        arrival, site, came_from = self.arrivals
        enters = self.inside.astype(np.int32)
        enters[site[came_from < 0]] = arrival[came_from < 0]
        head = enters[destination]
        if self.by_origin.any():
            tagged = np.flatnonzero(self.by_origin[destination])
            pairs = site.astype(np.int64) * sites + came_from
            named = np.flatnonzero(came_from >= 0)
            found = np.searchsorted(
                pairs[named], destination[tagged].astype(np.int64) * sites + origin[tagged]
            )
            head[tagged] = arrival[named[found]]
        return leaves[origin], head


def layout_of(  # noqa: PLR0913 - the tables of one item
    network: Network,
    item: int,
    *,
    lanes: LaneBounds,
    stock: Stock,
    groups: Groups,
    book: RuleBook,
    passes_on: BoolArray,
) -> Layout:
    """Return nodes and attachments of ``item``; ``passes_on`` tells the cross-docks."""
    sites = len(network.sites)
    origin, destination = network.lanes.origin[lanes.at], network.lanes.destination[lanes.at]
    has_stock, arrives, leaves, relevant, by_origin = (np.zeros(sites, np.bool_) for _ in range(5))
    has_stock[stock.site] = True
    arrives[destination] = True
    leaves[origin] = True
    relevant[stock.site] = True
    relevant[groups.site] = True
    relevant |= arrives | leaves
    named = np.array([allowed is not None for allowed in groups.origins], np.bool_)
    by_origin[groups.site[named]] = True
    apart = by_origin | (~passes_on & arrives & (has_stock | leaves))
    limit = _limits(network, item, book)
    received = relevant & ~apart & (limit["received"] != UNLIMITED)
    sent = relevant & (apart | (limit["sent"] != UNLIMITED))
    places = np.flatnonzero(relevant)
    kept = np.zeros(sites, np.bool_)
    kept[stock.kept_site] = True
    tiers = np.flatnonzero(kept[stock.site])
    single = np.flatnonzero(received | (apart & arrives & ~by_origin))
    tagged = np.flatnonzero(by_origin[destination]) if by_origin.any() else np.zeros(0, np.int64)
    pairs = np.unique(destination[tagged].astype(np.int64) * sites + origin[tagged])
    blocks = [
        (Side.ROOT, np.array([-1]), np.array([-1])),
        (Side.IN, places, np.full(places.shape[0], -1)),
        (Side.OUT, places, np.full(places.shape[0], -1)),
        (Side.SENT, np.flatnonzero(sent), np.full(int(sent.sum()), -1)),
        (Side.RECEIVED, single, np.full(single.shape[0], -1)),
        (Side.RECEIVED, pairs // max(sites, 1), pairs % max(sites, 1)),
        (Side.DEMAND, groups.site, np.arange(groups.site.shape[0])),
        (Side.STOCK, stock.site[tiers], stock.number[tiers]),
        (Side.KEEP, stock.kept_site, np.full(stock.kept_site.shape[0], -1)),
    ]
    starts = np.cumsum([0] + [block[1].shape[0] for block in blocks])
    nodes = Nodes(
        side=np.concatenate(
            [np.full(block[1].shape[0], SIDES.index(block[0]), np.int8) for block in blocks]
        ),
        site=np.concatenate([block[1] for block in blocks]).astype(np.int32),
        qualifier=np.concatenate([block[2] for block in blocks]).astype(np.int32),
    )
    numbers = [np.arange(starts[at], starts[at + 1]) for at in range(len(blocks))]

    def attached(at: int) -> IntArray:
        found = np.full(sites, -1, np.int64)
        found[blocks[at][1]] = numbers[at]
        return found

    inside, outside, sent_at = (attached(at) for at in (1, 2, 3))
    stock_at = np.full(stock.site.shape[0], -1, np.int64)
    stock_at[tiers] = numbers[7]
    arrivals = np.concatenate((numbers[4], numbers[5]))
    return Layout(
        nodes=nodes,
        relevant=places,
        apart=apart,
        by_origin=by_origin,
        closed=_closed_sites(network, item, book),
        passes_on=passes_on,
        limit=limit,
        inside=inside,
        outside=outside,
        sent=sent_at,
        demand=numbers[6],
        stock=stock_at,
        keep=numbers[8],
        arrivals=(arrivals, nodes.site[arrivals], nodes.qualifier[arrivals]),
    )


def _closed_sites(network: Network, item: int, book: RuleBook) -> BoolArray:
    """Return, in shape (sites,), where a closure of sites is in force."""
    closed = np.zeros(len(network.sites), np.bool_)
    for entry in book.closures(item):
        if isinstance(entry.rule, Closure) and entry.rule.sites is not None:
            closed |= entry.sites
    return closed


def _limits(network: Network, item: int, book: RuleBook) -> dict[str, IntArray]:
    """Return the least throughput limits by flow and site, in steps."""
    thing = network.items[item]
    limits = {flow: np.full(len(network.sites), UNLIMITED, np.int64) for flow in FLOWS}
    for entry in book.throughputs(item):
        if not isinstance(entry.rule, Throughput):
            continue
        amount = per_unit(thing, entry.rule.measure)
        if amount is None:
            raise ValueError(f"item {thing.id} says nothing of {entry.rule.measure}")
        if amount == 0:
            continue  # What weighs nothing passes any number of times.
        most = int(
            Rationals.given([entry.rule.maximum / (amount * thing.step)]).rounded(
                up=False, what="maximum of a throughput rule"
            )[0]
        )
        known = limits[entry.rule.flow]
        tighter = entry.sites & ((known == UNLIMITED) | (known > most))
        known[tighter] = most
    return limits
