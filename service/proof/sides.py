"""What a site is made of for one item: where goods come in, pass, and leave."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from service.network.columns import IntArray, Network
from service.network.rules import Throughput
from service.network.units import per_unit
from service.proof.groups import Wanted
from service.proof.rulings import Rulings, UnusableNetworkError, measure_of
from service.proof.stock import Stock
from service.proof.usable import cross_docks, of_rows, stock_behind

UNLIMITED = -1


@dataclass(frozen=True, slots=True, kw_only=True)
class SiteSides:
    """One site as an item sees it.

    ``apart`` sites keep what they receive from what they send: it may not be passed on, or some
    order lines there accept only certain origins. ``received_from`` are the qualifiers of the
    received nodes: None, or positions of sites (``by_origin``). ``through``, ``received`` and
    ``sent`` are limits in steps, -1 for none; ``past`` is the limit of what goes from a received
    node to order lines or on. ``stock_behind`` are the sites whose stock can come from an origin.
    """

    apart: bool
    passes: bool
    by_origin: bool
    received_from: tuple[int | None, ...]
    has_sent: bool
    through: int
    received: int
    sent: int
    past: int
    stock_behind: Mapping[int, frozenset[int]]

    def allowed(self, origin: int | None, origins: frozenset[int]) -> bool:
        """Return whether goods from ``origin`` may serve who accepts only ``origins``.

        Raises ``UnusableNetworkError`` where some of the stock behind ``origin`` is accepted and
        some is not, since it cannot be told apart on arrival.
        """
        if origin is None:
            raise KeyError(origin)
        behind = self.stock_behind[origin]
        if behind & origins and behind - origins:
            raise UnusableNetworkError("origins behind a cross-dock are accepted only in part")
        return bool(behind & origins)


def site_sides(  # noqa: PLR0913 - all that an item has is looked at here
    network: Network,
    rulings: Rulings,
    item: int,
    *,
    rows: IntArray,
    stock: Mapping[int, Stock],
    wanted: Wanted,
    ways: tuple[Network, IntArray] | None = None,
) -> dict[int, SiteSides]:
    """Return the sites that matter to ``item``, ascending, and what each is made of.

    ``ways`` are the lanes over which stock can come, if they are others than ``rows``.
    """
    stated, usable = (network, rows) if ways is None else ways
    lanes = network.lanes
    starting = np.zeros(len(network.sites), dtype=np.bool_)
    starting[of_rows(lanes.origin, rows)] = True
    ending = np.zeros(len(network.sites), dtype=np.bool_)
    ending[of_rows(lanes.destination, rows)] = True
    choosy = {group.site for group in wanted.groups if group.origins is not None}
    relevant = (
        set(stock)
        | {group.site for group in wanted.groups}
        | set(np.flatnonzero(starting | ending).tolist())
    )
    passing = cross_docks(network).tolist()
    closed = rulings.closed_sites(item, len(network.sites)).tolist()
    start_at, end_at = starting.tolist(), ending.tolist()
    limits = _throughput_limits(network, rulings, item, relevant)
    sides: dict[int, SiteSides] = {}
    # Most sites are like all others that pass goods on, or do not, and share what is said of them.
    alike: dict[bool, SiteSides] = {}
    for site in sorted(relevant):
        starts, arrives = start_at[site], end_at[site]
        mixed = not passing[site] and arrives and (site in stock or starts)
        apart = site in choosy or mixed
        limit = limits.get(site, {})
        if apart:
            # No one arc carries all that is received or passes here, nor all that a cross-dock
            # sends on: such a limit is one that several lanes share.
            kept = set() if passing[site] else {"sent"}
            limit = {flow: steps for flow, steps in limit.items() if flow in kept}
        origins: list[int | None] = []
        behind = {}
        if site in choosy:
            before = np.unique(lanes.origin[rows[lanes.destination[rows] == site]]).tolist()
            origins = list(before)
            behind = {origin: stock_behind(stated, item, usable, origin) for origin in before}
        elif (apart and arrives) or "received" in limit:
            origins = [None]
        plain = not (apart or limit or closed[site])
        if plain and passing[site] in alike:
            sides[site] = alike[passing[site]]
            continue
        sides[site] = SiteSides(
            apart=apart,
            passes=passing[site],
            by_origin=site in choosy,
            received_from=tuple(origins),
            has_sent=apart or "sent" in limit,
            through=0 if closed[site] else limit.get("through", UNLIMITED),
            received=limit.get("received", UNLIMITED),
            sent=limit.get("sent", UNLIMITED),
            past=0 if closed[site] else UNLIMITED,
            stock_behind=behind,
        )
        if plain:
            alike[passing[site]] = sides[site]
    return sides


def _throughput_limits(
    network: Network, rulings: Rulings, item: int, relevant: set[int]
) -> dict[int, dict[str, int]]:
    """Return by site and flow the least limit in steps of the rules that pick both."""
    thing = network.items[item]
    limits: dict[int, dict[str, int]] = {}
    for ruling in rulings.throughputs(item):
        rule = ruling.rule
        assert isinstance(rule, Throughput)  # noqa: S101 - what throughputs() returns
        if not per_unit(thing, rule.measure):
            continue  # It cannot pass, or the limit itself says that it is not known.
        for site in np.flatnonzero(ruling.sites).tolist():
            if site not in relevant:
                continue
            exact = rule.maximum / (measure_of(thing, rule.measure) * thing.step)
            of_site = limits.setdefault(site, {})
            steps = exact.numerator // exact.denominator
            of_site[rule.flow] = min(steps, of_site.get(rule.flow, steps))
    return limits
