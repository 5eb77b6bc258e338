"""What one run leaves for the next to start from: what stock was worth where it lay.

It is a hint and never a fact: prices decide where the search for an optimum starts, and no plan
shows from where that was. Which lanes are worth a look follows from the prices, so that none are
kept, and what has changed since is met by the lanes as they are now.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
import orjson

from service.network.columns import IntArray, Network
from service.planning.flow.contraction import Contraction
from service.planning.model.arcs import SIDES, Kind, MoneyArray
from service.planning.model.item_network import ItemNetwork
from service.planning.solve import ItemFlow
from service.planning.wide.scarcity_prices import FloatArray

FORMAT = 1

Price = tuple[int, float]


@dataclass(frozen=True, slots=True, kw_only=True)
class WarmStart:
    """Prices of stock: by item id, then by the name of the place.

    Each is so many weights of a priority, and money per item unit: where stock is scarce a step
    more is worth what it saves, and how much that weighs differs from network to network.
    """

    prices: Mapping[str, Mapping[str, Price]]

    @staticmethod
    def read(path: Path) -> "WarmStart":
        """Return what a former run left at ``path``; nothing where it is absent or damaged."""
        try:
            document: Any = orjson.loads(path.read_bytes())
            if document["format"] != FORMAT:
                return WarmStart(prices={})
            prices = {
                str(item): {
                    str(place): (int(weights), float(money))
                    for place, (weights, money) in known.items()
                }
                for item, known in document["prices"].items()
            }
        except (OSError, ValueError, TypeError, KeyError, AttributeError):
            return WarmStart(prices={})
        return WarmStart(prices=prices)

    def write(self, path: Path) -> None:
        """Write it for ``read``."""
        path.write_bytes(orjson.dumps({"format": FORMAT, "prices": self.prices}))

    def by_place(
        self,
        network: Network,
        own: ItemNetwork,
        contraction: Contraction,
        weighted: MoneyArray,
        *,
        cost_scale: Fraction,
    ) -> FloatArray | None:
        """Return prices by place of ``contraction``, NaN where unknown; None: nothing is known."""
        known = self.prices.get(network.items[own.item].id)
        if not known:
            return None
        nodes = _stocked(own)
        unknown = (0, np.nan)
        stated = np.array([known.get(name, unknown) for name in _names(network, own, nodes)])
        weights, money = stated[:, 0], stated[:, 1]
        if not np.isfinite(money).any():
            return None
        price = weights * _weight(own) + money * _scaled(network, own, cost_scale)
        offset = contraction.offsets(weighted)
        found: FloatArray = np.full(contraction.nodes, np.nan)
        found[contraction.place[nodes]] = price - offset[nodes].astype(np.float64)
        return found


def left_by(network: Network, flows: Sequence[ItemFlow], *, cost_scale: Fraction) -> WarmStart:
    """Return what the plan made of ``flows`` leaves for the next."""
    prices = {}
    for flow in flows:
        nodes = _stocked(flow.own)
        price, weight = flow.price[nodes].astype(np.float64), _weight(flow.own)
        weights = np.rint(price / weight) if weight else np.zeros(price.shape[0])
        money = (price - weights * weight) / _scaled(network, flow.own, cost_scale)
        stated = zip(weights.astype(np.int64).tolist(), money.tolist(), strict=True)
        prices[network.items[flow.own.item].id] = dict(
            zip(_names(network, flow.own, nodes), stated, strict=True)
        )
    return WarmStart(prices=prices)


def _stocked(own: ItemNetwork) -> IntArray:
    """Return the nodes at which stock comes in."""
    nodes: IntArray = np.unique(own.arcs.head[own.of_kind(Kind.SUPPLY)])
    return nodes


def _names(network: Network, own: ItemNetwork, nodes: IntArray) -> list[str]:
    """Return what the nodes are called in any network with the same sites."""
    of = own.layout.nodes
    return [
        f"{SIDES[side]} {number} {network.sites[site].id}"
        for side, number, site in zip(
            of.side[nodes].tolist(),
            of.qualifier[nodes].tolist(),
            of.site[nodes].tolist(),
            strict=True,
        )
    ]


def _scaled(network: Network, own: ItemNetwork, cost_scale: Fraction) -> float:
    """Return the scaled money per step in one unit of money per item unit."""
    return float(cost_scale * network.items[own.item].step)


def _weight(own: ItemNetwork) -> float:
    """Return what a step short of the last priority weighs, 0 where none has one."""
    return float(own.base) if own.priorities else 0.0
