"""Flow and prices of one item as the certificate states them."""

from collections.abc import Mapping

import numpy as np

from service.network.columns import IntArray, Network
from service.planning.documents.amounts import Document, texts
from service.planning.model.arcs import ROOT, SIDES, Kind, Side
from service.planning.model.item_network import ItemNetwork
from service.planning.solve import ItemFlow


def item_proof(network: Network, solved: ItemFlow) -> Document:
    """Return flow and prices of one item, zeros left out.

    Rows are sorted by what names them, by UTF-8 bytes, which is the order of characters too; an
    absent name comes first.
    """
    own = solved.own
    stock, step = own.stock, network.items[own.item].step
    days = own.layout.places
    sites = [site.id for site in network.sites]
    shelved = own.layout.stock >= 0
    plain = {
        tier: steps for tier, steps in solved.amounts(Kind.SUPPLY).items() if not shelved[tier]
    }

    def drawn() -> list[Document]:
        if days.day is None:
            # Stock that may be kept is drawn where it leaves the shelf, other stock where it
            # enters.
            return tiers(plain | solved.amounts(Kind.DRAW))
        arcs = own.of_kind(Kind.SUPPLY, Kind.DRAW)
        at_place = own.layout.nodes.place[own.arcs.head[arcs]]
        arcs = arcs[(solved.flow[arcs] != 0) & (at_place >= 0)]
        place, tier = own.layout.nodes.place[own.arcs.head[arcs]], own.subject[arcs]
        order = np.lexsort((place, stock.number[tier], stock.site[tier]))
        return [
            {
                "site": sites[stock.site[own_tier]],
                "day": days.date_of(at),
                "tier": int(stock.number[own_tier]),
                "quantity": quantity,
            }
            for own_tier, at, quantity in zip(
                tier[order].tolist(),
                place[order].tolist(),
                texts(solved.flow[arcs[order]].tolist(), step),
                strict=True,
            )
        ]

    def tiers(amounts: Mapping[int, int]) -> list[Document]:
        order = sorted(amounts, key=lambda tier: (int(stock.site[tier]), int(stock.number[tier])))
        quantities = texts([amounts[tier] for tier in order], step)
        return [
            {
                "site": sites[stock.site[tier]],
                "tier": int(stock.number[tier]),
                "quantity": quantity,
            }
            for tier, quantity in zip(order, quantities, strict=True)
        ]

    # Prices of items that share limits stand with those of the limits.
    shares = solved.reduced is not None
    prices = [] if shares else named_nodes(network, own)
    amounts = solved.price.tolist()
    for node, name in prices:
        name["price"] = str(int(amounts[node]))
    return {
        "item": network.items[own.item].id,
        "base": "0" if shares else str(own.base),
        **({"late_base": str(own.late_base)} if own.late_base else {}),
        "draws": drawn(),
        "kept": tiers(solved.amounts(Kind.KEPT)),
        "serves": _serves(network, solved),
        "passes": _passes(network, solved),
        **_stored(network, solved),
        "shortages": _shortages(network, solved),
        "prices": [name for _, name in prices],
    }


def named_nodes(network: Network, own: ItemNetwork) -> list[tuple[int, Document]]:
    """Return all nodes but the root with what the certificate calls them, sorted by that."""
    nodes = own.layout.nodes
    sites, sides = [site.id for site in network.sites], [side.value for side in SIDES]
    labels = network.demand.reference[own.groups.label].tolist()
    demand, stock, received = (
        SIDES.index(side) for side in (Side.DEMAND, Side.STOCK, Side.RECEIVED)
    )
    order = _in_order(own)
    order = order[order != ROOT]
    named: list[tuple[int, Document]] = []
    days = own.layout.places
    for node, place, site, side, qualifier in zip(
        order.tolist(),
        nodes.place[order].tolist(),
        nodes.site[order].tolist(),
        nodes.side[order].tolist(),
        nodes.qualifier[order].tolist(),
        strict=True,
    ):
        text: str | None = None
        if side == demand:
            text = labels[qualifier].decode()
        elif side == stock:
            text = str(qualifier)
        elif side == received and qualifier >= 0:
            text = sites[qualifier]
        name: Document = {"site": sites[site], "side": sides[side], "qualifier": text}
        if days.day is not None and place >= 0:
            name["day"] = days.date_of(place)
        named.append((node, name))
    return named


def _in_order(own: ItemNetwork) -> IntArray:
    """Return all nodes, sorted by site, side and qualifier.

    Sites and order lines are in the order of their names, which their positions keep.
    """
    nodes = own.layout.nodes
    side_rank = np.argsort(np.argsort([side.value for side in SIDES]))
    qualifier = nodes.qualifier.astype(np.int64)
    demand = nodes.side == SIDES.index(Side.DEMAND)
    qualifier[demand] = own.groups.label[qualifier[demand]]
    stock = nodes.side == SIDES.index(Side.STOCK)
    # Tier numbers are sorted as the texts they are.
    numbers = sorted({int(number) for number in qualifier[stock]}, key=str)
    rank = {number: at for at, number in enumerate(numbers)}
    qualifier[stock] = [rank[number] for number in qualifier[stock].tolist()]
    return np.lexsort((qualifier, nodes.place, side_rank[nodes.side], nodes.site))


def _serves(network: Network, solved: ItemFlow) -> list[Document]:
    """Return what reaches each group, from where."""
    own = solved.own
    groups, nodes = own.groups, own.layout.nodes
    arcs = own.of_kind(Kind.SERVE, Kind.SERVE_ARRIVED)
    arcs = arcs[solved.flow[arcs] != 0]
    group, arrived = own.subject[arcs], own.kind[arcs] == Kind.SERVE_ARRIVED
    origin, place = nodes.qualifier[own.arcs.tail[arcs]], nodes.place[own.arcs.tail[arcs]]
    label = groups.label[group]
    order = np.lexsort((place, origin, arrived, label, groups.site[group]))
    sites = [site.id for site in network.sites]
    return [
        {
            "site": sites[site],
            "group": reference.decode(),
            "from": "received" if came else "out",
            "origin": sites[whose] if whose >= 0 else None,
            **_on_day(own, at),
            "quantity": quantity,
        }
        for site, reference, came, whose, at, quantity in zip(
            groups.site[group[order]].tolist(),
            network.demand.reference[label[order]].tolist(),
            arrived[order].tolist(),
            origin[order].tolist(),
            place[order].tolist(),
            texts(solved.flow[arcs[order]].tolist(), network.items[own.item].step),
            strict=True,
        )
    ]


def _stored(network: Network, solved: ItemFlow) -> Document:
    """Return what stays overnight, by site and the day before; nothing where nothing does."""
    own, days = solved.own, solved.own.layout.places
    amounts = solved.amounts(Kind.STORE)
    if not amounts:
        return {}
    order = sorted(amounts)
    quantities = texts([amounts[place] for place in order], network.items[own.item].step)
    return {
        "stored": [
            {
                "site": network.sites[days.site[place]].id,
                "day": days.date_of(place),
                "quantity": quantity,
            }
            for place, quantity in zip(order, quantities, strict=True)
        ]
    }


def _on_day(own: ItemNetwork, place: int) -> Document:
    """Return the day of a place, as it stands in a row; nothing where there are no dates."""
    day = own.layout.places.date_of(place)
    return {} if day is None else {"day": day}


def _passes(network: Network, solved: ItemFlow) -> list[Document]:
    """Return what passes cross-docks that keep goods apart."""
    own = solved.own
    arcs = own.of_kind(Kind.PASS)
    arcs = arcs[solved.flow[arcs] != 0]
    origin = own.layout.nodes.qualifier[own.arcs.tail[arcs]]
    order = np.lexsort((origin, own.subject[arcs]))
    sites = [site.id for site in network.sites]
    return [
        {
            "site": sites[own.layout.places.site[place]],
            "origin": sites[whose] if whose >= 0 else None,
            **_on_day(own, place),
            "quantity": quantity,
        }
        for place, whose, quantity in zip(
            own.subject[arcs[order]].tolist(),
            origin[order].tolist(),
            texts(solved.flow[arcs[order]].tolist(), network.items[own.item].step),
            strict=True,
        )
    ]


def _shortages(network: Network, solved: ItemFlow) -> list[Document]:
    """Return what is short of each group and of kept stock."""
    own = solved.own
    groups, kept_site = own.groups, own.stock.kept_site.tolist()
    short = [
        (int(groups.site[group]), network.demand.reference[groups.label[group]].decode(), steps)
        for group, steps in solved.amounts(Kind.SHORT).items()
    ]
    # No name at all comes before any other; a group's is never empty.
    short += [(kept_site[row], "", steps) for row, steps in solved.amounts(Kind.KEEP_SHORT).items()]
    short.sort()
    quantities = texts([steps for _, _, steps in short], network.items[own.item].step)
    return [
        {"site": network.sites[site].id, "group": name or None, "quantity": quantity}
        for (site, name, _), quantity in zip(short, quantities, strict=True)
    ]
