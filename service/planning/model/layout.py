"""Which nodes the sites of one item need, and where lanes begin and end (contract of proof/arcs).

A site is *apart* where its own stock and what arrives must not mix: because what arrives may not
leave again, or because an order line says whose stock may serve it. Otherwise it is *joined*.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from service.network.columns import BoolArray, CodeArray, IntArray, Network
from service.network.days import cut_off_day
from service.network.rules import Closure, Throughput
from service.network.units import per_unit
from service.planning.model.arcs import SIDES, UNLIMITED, Nodes, Side
from service.planning.model.bounds import LaneBounds
from service.planning.model.groups import Groups
from service.planning.model.rule_book import RuleBook
from service.planning.model.scaling import Rationals
from service.planning.model.site_days import SiteDays, dated_places, undated_places
from service.planning.model.stock import Stock

FLOWS = ("received", "sent", "through")


@dataclass(frozen=True, slots=True, kw_only=True)
class Layout:
    """Nodes of one item, and for each of its places where things attach (-1: nowhere).

    ``inside``, ``outside`` and ``sent`` are node positions of shape (places,); ``sent`` is where
    lanes leave from; ``relevant`` are the places that matter to the item. ``apart``, ``by_origin``,
    ``closed`` and ``passes_on`` have shape (sites,). ``limit`` holds, for each throughput flow, the
    least limit in steps by site (``UNLIMITED``: none). ``arrivals`` lists received nodes as (node,
    place, origin site or -1).
    """

    nodes: Nodes
    places: SiteDays
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
    arrivals: tuple[IntArray, IntArray, CodeArray]

    def lane_ends(self, origin: CodeArray) -> tuple[CodeArray, CodeArray]:
        """Return the nodes that lanes from some sites leave and enter, at the item's places."""
        sites = self.by_origin.shape[0]
        leaves = np.where(self.sent >= 0, self.sent, self.outside).astype(np.int32)
        arrival, place, came_from = self.arrivals
        enters = self.inside.astype(np.int32)
        enters[place[came_from < 0]] = arrival[came_from < 0]
        head = enters[self.places.head]
        if self.by_origin.any():
            tagged = np.flatnonzero(self.by_origin[self.places.site[self.places.head]])
            pairs = place.astype(np.int64) * sites + came_from
            named = np.flatnonzero(came_from >= 0)
            found = np.searchsorted(
                pairs[named], self.places.head[tagged].astype(np.int64) * sites + origin[tagged]
            )
            head[tagged] = arrival[named[found]]
        return leaves[self.places.tail], head


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
    # Where goods are kept apart no one arc carries all that is received, passes or is sent on:
    # there the limit is a row over the lanes (``shared_limits``).
    limit["received"][apart] = UNLIMITED
    limit["through"][apart] = UNLIMITED
    limit["sent"][apart & passes_on] = UNLIMITED
    if lanes.departs is None:
        days = undated_places(sites, origin, destination)
    else:
        limited = np.logical_or.reduce([limit[flow] != UNLIMITED for flow in FLOWS])
        days = dated_places(
            (origin, destination),
            lanes,
            stock,
            groups,
            apart_by_day=passes_on | limited,
            today=cut_off_day(network.head),
        )
    received = relevant & ~apart & (limit["received"] != UNLIMITED)
    sent = relevant & (apart | (limit["sent"] != UNLIMITED))
    count = days.site.shape[0]
    places = np.flatnonzero(relevant[days.site])
    sending = np.flatnonzero(sent[days.site])
    shelved = days.counts() > 1
    shelved[stock.kept_site] = True
    tiers = np.flatnonzero(shelved[stock.site])
    single = np.flatnonzero((received | (apart & arrives & ~by_origin))[days.site])
    tagged = np.flatnonzero(by_origin[destination]) if by_origin.any() else np.zeros(0, np.int64)
    pairs = np.unique(days.head[tagged].astype(np.int64) * sites + origin[tagged])
    none = np.array([-1])
    blocks = [
        (Side.ROOT, none, none, none),
        (Side.IN, days.site[places], places, None),
        (Side.OUT, days.site[places], places, None),
        (Side.SENT, days.site[sending], sending, None),
        (Side.RECEIVED, days.site[single], single, None),
        (
            Side.RECEIVED,
            days.site[pairs // max(sites, 1)],
            pairs // max(sites, 1),
            pairs % max(sites, 1),
        ),
        (Side.DEMAND, groups.site, None, np.arange(groups.site.shape[0])),
        (Side.STOCK, stock.site[tiers], None, stock.number[tiers]),
        (Side.KEEP, stock.kept_site, None, None),
    ]
    starts = np.cumsum([0] + [block[1].shape[0] for block in blocks])
    nodes = Nodes(
        side=np.concatenate(
            [np.full(block[1].shape[0], SIDES.index(block[0]), np.int8) for block in blocks]
        ),
        site=np.concatenate([block[1] for block in blocks]).astype(np.int32),
        qualifier=_filled([block[3] for block in blocks], starts).astype(np.int32),
        place=_filled([block[2] for block in blocks], starts),
    )
    numbers = [np.arange(starts[at], starts[at + 1]) for at in range(len(blocks))]

    def attached(at: int, own: IntArray) -> IntArray:
        found = np.full(count, -1, np.int64)
        found[own] = numbers[at]
        return found

    inside, outside = attached(1, places), attached(2, places)
    sent_at = attached(3, sending)
    stock_at = np.full(stock.site.shape[0], -1, np.int64)
    stock_at[tiers] = numbers[7]
    arrivals = np.concatenate((numbers[4], numbers[5]))
    return Layout(
        nodes=nodes,
        places=days,
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
        arrivals=(arrivals, nodes.place[arrivals], nodes.qualifier[arrivals]),
    )


def _filled(columns: Sequence[IntArray | CodeArray | None], starts: IntArray) -> IntArray:
    """Return columns one after the other, -1 where there is none; they begin at ``starts``."""
    whole = np.full(int(starts[-1]), -1, np.int64)
    for column, start, stop in zip(columns, starts[:-1], starts[1:], strict=True):
        if column is not None:
            whole[start:stop] = column
    return whole


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
        if not amount:
            continue  # It cannot pass, as the intake has seen, or weighs nothing.
        most = int(
            Rationals.given([entry.rule.maximum / (amount * thing.step)]).rounded(
                up=False, what="maximum of a throughput rule"
            )[0]
        )
        known = limits[entry.rule.flow]
        tighter = entry.sites & ((known == UNLIMITED) | (known > most))
        known[tighter] = most
    return limits
