"""The certificate: flow, prices and achievements that let anybody prove the plan again."""

import platform
from collections.abc import Mapping
from fractions import Fraction
from functools import cache
from importlib.metadata import version
from typing import Any

from service.network.columns import Network
from service.planning.amounts import text
from service.planning.arcs import ROOT, SIDES, Kind, Side
from service.planning.compile import Compiled
from service.planning.item_network import ItemNetwork
from service.planning.limits import NoCirculationError
from service.planning.priorities import Achieved, money_of
from service.planning.solve import ItemFlow

FORMAT = 1

Document = dict[str, Any]


@cache
def versions() -> dict[str, str]:
    """Return the versions that a plan is a function of, besides network and options."""
    return {
        "lanewright": version("lanewright"),
        "ortools": version("ortools"),
        "numpy": version("numpy"),
        "scipy": version("scipy"),
        "python": platform.python_version(),
    }


def proved_certificate(  # noqa: PLR0913 - the parts of one document
    compiled: Compiled,
    solved: list[ItemFlow],
    achieved: list[Achieved],
    *,
    total_cost: Fraction,
    network_digest: str,
    options_digest: str,
) -> Document:
    """Return the certificate of a plan: every step's bound equals what it achieves."""
    network = compiled.network
    steps: list[Document] = []
    for flow, result in zip(solved, achieved, strict=True):
        item = network.items[flow.own.item]
        for priority, short in result.short:
            quantity = text(short * item.step)
            steps.append(
                {
                    "item": item.id,
                    "of": "shortage",
                    "priority": priority,
                    "achieved": quantity,
                    "bound": quantity,
                }
            )
        money = text(money_of(result.money, compiled.cost_scale))
        steps.append({"item": item.id, "of": "cost", "achieved": money, "bound": money})
    return {
        **_head(compiled, network_digest=network_digest, options_digest=options_digest),
        "cost_scale": text(compiled.cost_scale),
        "total_cost": text(total_cost),
        "lower_bound": text(total_cost),
        "gap": "0",
        "lexicographic": "proved",
        "versions": versions(),
        "steps": steps,
        "items": [_item(network, flow) for flow in solved],
    }


def contradiction_certificate(
    compiled: Compiled,
    cuts: list[tuple[ItemNetwork, NoCirculationError]],
    *,
    network_digest: str,
    options_digest: str,
) -> Document:
    """Return the certificate of a network without a plan: a set that no flow satisfies an item."""
    network = compiled.network
    return {
        **_head(compiled, network_digest=network_digest, options_digest=options_digest),
        "cost_scale": None,
        "total_cost": None,
        "lower_bound": None,
        "gap": None,
        "lexicographic": "no_plan",
        "versions": versions(),
        "cuts": [
            {
                "item": network.items[own.item].id,
                "nodes": _in_order(
                    [
                        _node(network, own, node)
                        for node in range(1, own.node_count)
                        if cut.places[node]
                    ]
                ),
                "root": bool(cut.places[ROOT]),
                "forced_out": text(cut.forced_out * network.items[own.item].step),
                "can_enter": text(cut.can_enter * network.items[own.item].step),
            }
            for own, cut in cuts
        ],
    }


def _head(compiled: Compiled, *, network_digest: str, options_digest: str) -> Document:
    """Return the fields that every certificate begins with."""
    return {
        "format": FORMAT,
        "method": compiled.method,
        "network_digest": network_digest,
        "options_digest": options_digest,
        "currency": compiled.network.head["currency"],
    }


def _item(network: Network, solved: ItemFlow) -> Document:
    """Return flow and prices of one item, zeros left out."""
    own = solved.own
    step = network.items[own.item].step
    stock, groups, nodes = own.stock, own.groups, own.layout.nodes

    def site(place: int) -> str:
        return network.sites[int(place)].id

    def label(group: int) -> str:
        name: bytes = network.demand.reference[groups.label[group]]
        return name.decode()

    def tiers(amounts: Mapping[int, int]) -> list[Document]:
        return _in_order(
            [
                {
                    "site": site(stock.site[tier]),
                    "tier": int(stock.number[tier]),
                    "quantity": text(steps * step),
                }
                for tier, steps in amounts.items()
            ]
        )

    serves, passes = [], []
    moving = own.of_kind(Kind.SERVE, Kind.SERVE_ARRIVED, Kind.PASS)
    for arc in moving[solved.flow[moving] != 0].tolist():
        tail = int(own.arcs.tail[arc])
        subject = int(own.subject[arc])
        origin = int(nodes.qualifier[tail])
        origin_id = site(origin) if origin >= 0 else None
        quantity = text(int(solved.flow[arc]) * step)
        if own.kind[arc] == Kind.PASS:
            passes.append({"site": site(subject), "origin": origin_id, "quantity": quantity})
        else:
            arrived = own.kind[arc] == Kind.SERVE_ARRIVED
            serves.append(
                {
                    "site": site(groups.site[subject]),
                    "group": label(subject),
                    "from": "received" if arrived else "out",
                    "origin": origin_id,
                    "quantity": quantity,
                }
            )
    short: list[Document] = [
        {"site": site(groups.site[group]), "group": label(group), "quantity": text(steps * step)}
        for group, steps in solved.amounts(Kind.SHORT).items()
    ]
    short += [
        {"site": site(stock.kept_site[row]), "group": None, "quantity": text(steps * step)}
        for row, steps in solved.amounts(Kind.KEEP_SHORT).items()
    ]
    shelved = own.layout.stock >= 0
    plain = {
        tier: steps for tier, steps in solved.amounts(Kind.SUPPLY).items() if not shelved[tier]
    }
    prices = solved.price.tolist()
    return {
        "item": network.items[own.item].id,
        "base": str(own.base),
        # Stock that may be kept is drawn where it leaves the shelf, other stock where it enters.
        "draws": tiers(plain | solved.amounts(Kind.DRAW)),
        "kept": tiers(solved.amounts(Kind.KEPT)),
        "serves": _in_order(serves),
        "passes": _in_order(passes),
        "shortages": _in_order(short),
        "prices": _in_order(
            [
                {**_node(network, own, node), "price": str(int(prices[node]))}
                for node in range(1, own.node_count)
            ]
        ),
    }


def _node(network: Network, own: ItemNetwork, node: int) -> Document:
    """Return the name of a node other than the root."""
    nodes = own.layout.nodes
    side, qualifier = SIDES[nodes.side[node]], int(nodes.qualifier[node])
    named: str | None = None
    if side == Side.DEMAND:
        named = network.demand.reference[own.groups.label[qualifier]].decode()
    elif side == Side.STOCK:
        named = str(qualifier)
    elif side == Side.RECEIVED and qualifier >= 0:
        named = network.sites[qualifier].id
    return {
        "site": network.sites[nodes.site[node]].id,
        "side": side.value,
        "qualifier": named,
    }


def _in_order(rows: list[Document]) -> list[Document]:
    """Return rows sorted by what names them, by UTF-8 bytes; an absent name comes first."""

    def key(row: Document) -> list[tuple[bool, bytes | int]]:
        return [
            (value is not None, value if isinstance(value, int) else str(value or "").encode())
            for name, value in row.items()
            if name not in ("price", "quantity")
        ]

    return sorted(rows, key=key)
