"""Networks of many lanes for tests, and both routes to the plan of each, compared."""

from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from random import Random
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np
import orjson

from service.network.canonical import read_network
from service.network.options import Options, read_options
from service.planning.documents.certificate import proved_certificate
from service.planning.documents.plan import Setting, planned
from service.planning.documents.priorities import achieved
from service.planning.flow.contraction import Contraction
from service.planning.model.arcs import MoneyArray
from service.planning.model.compile import Compiled, compile_network
from service.planning.model.item_network import ItemNetwork
from service.planning.solution import Solution
from service.planning.solve import ItemFlow, solve_item
from service.planning.wide.routes import Front, FullRoute, SiftedRoute
from service.planning.wide.scarcity_prices import FloatArray
from tests.factories import Document, network_document, take_in


@dataclass(slots=True)
class Seen:
    """What sifting did: (round, lanes listed, lanes that would help), and whether it ended."""

    rounds: list[tuple[int, int, int]] = field(default_factory=list)
    sifted: list[bool] = field(default_factory=list)

    def front(self, *, start: FloatArray | None = None) -> Front:
        """Return a front that sifts everything, however small; ``start`` is repeated by place."""

        def sifting(own: ItemNetwork, whole: Contraction, weighted: MoneyArray) -> SiftedRoute:
            given = None if start is None else np.resize(start, whole.nodes)
            return _Watched(
                own, whole, weighted, start=given, seen=self._note, outcome=self.sifted.append
            )

        return sifting

    def _note(self, *numbers: int) -> None:
        first, second, third = numbers
        self.rounds.append((first, second, third))


class _Watched(SiftedRoute):
    """Tells whether sifting ended by itself."""

    def __init__(self, *item: Any, outcome: Callable[[bool], None], **options: Any) -> None:  # noqa: ANN401 - as above
        super().__init__(*item, **options)
        self._outcome = outcome

    def optimum(self) -> Any:  # noqa: ANN401 - as above
        found = super().optimum()
        self._outcome(self._full is None)
        return found


def compiled(document: Document, **options: str) -> tuple[Compiled, Options]:
    """Take a network in as the service does, and compile it."""
    effective, faults = read_options(options)
    assert effective is not None, faults
    with TemporaryDirectory() as name:
        report = take_in(orjson.dumps(document), Path(name), effective)
        assert report.status == "accepted", report.faults
        network = read_network(Path(name) / "network.zip")
    return compile_network(network, effective), effective


def documents(made: Compiled, flows: list[ItemFlow]) -> tuple[bytes, bytes]:
    """Return plan and certificate as the planning task writes them."""
    setting = Setting(
        network_digest="sha-256:" + "0" * 64,
        options_digest="sha-256:" + "0" * 64,
        warnings=(),
        set_aside=(),
    )
    solution = Solution(flows=tuple(flows), coupled=())
    plan = planned(made, solution, setting)
    shortages = made.options.shortages == "allow"
    certificate = proved_certificate(
        made,
        solution,
        [achieved(flow, shortages=shortages) for flow in flows],
        total_cost=plan.total_cost,
        network_digest=setting.network_digest,
        options_digest=setting.options_digest,
    )
    return orjson.dumps(plan.document), orjson.dumps(certificate)


def agree(document: Document, front: Front, **options: str) -> None:
    """Assert that ``front`` and the full solve end with the same bytes, plan and certificate."""
    made, _ = compiled(document, **options)
    network = made.network
    full = [solve_item(network, own, front=FullRoute) for own in made.items]
    other = [solve_item(network, own, front=front) for own in made.items]
    for one, two in zip(full, other, strict=True):
        assert np.array_equal(one.flow, two.flow)
        assert np.array_equal(one.price, two.price)
    assert documents(made, full) == documents(made, other)


def wide_network(  # noqa: PLR0913 - what a network can be like
    rng: Random,
    *,
    origins: int,
    ends: int,
    costs: Callable[[Random], int],
    ratio: float = 1.2,
    density: float = 1.0,
    capped: float = 0.0,
    forced: float = 0.0,
    carriers: int = 1,
    docks: int = 0,
    claims: bool = False,
    tiers: int = 1,
) -> Document:
    """Draw a network with a lane from almost every origin to every end.

    ``ratio`` is supply over demand, ``density`` the share of pairs with a lane, ``capped`` and
    ``forced`` the shares of lanes with a capacity or something that must ship. ``docks`` of
    the origins have no stock but lanes from the others. With ``claims`` lines differ in priority
    or in what they are worth.
    """
    stores = [f"W{number}" for number in range(origins)]
    crossings = [f"X{number}" for number in range(docks)]
    shops = [f"S{number}" for number in range(ends)]
    pairs = [(origin, shop) for origin in stores + crossings for shop in range(ends)]
    wanted = [rng.randint(1, 30) for _ in shops]
    shares = [rng.uniform(0.5, 2) for _ in stores]
    total = round(sum(wanted) * ratio)
    stock = [int(total * share / sum(shares)) for share in shares]
    stock[0] += total - sum(stock)
    lanes: list[dict[str, str]] = []
    for origin, shop in pairs:
        for carrier in range(carriers):
            if rng.random() >= density:
                continue
            lane = {"origin": origin, "destination": shops[shop], "unit_cost": str(costs(rng))}
            lane |= {"carrier": f"C{carrier}"} if carriers > 1 else {}
            if rng.random() < capped:
                lane["capacity"] = str(max(1, int(wanted[shop] * rng.uniform(0, 0.8))))
            elif rng.random() < forced and wanted[shop] > 3 * origins * forced:
                lane["must_ship"] = "1"
            lanes.append(lane)
    lanes += [
        {"origin": store, "destination": dock, "unit_cost": str(costs(rng) // 2)}
        for store in stores
        for dock in crossings
    ]
    demand = []
    for number, quantity in enumerate(wanted):
        line: dict[str, Any] = {
            "reference": f"L{number}",
            "site": shops[number],
            "item": "GOODS",
            "quantity": str(quantity),
        }
        if claims and rng.random() < 0.6:
            line["priority"] = rng.randint(1, 3)
        elif claims:
            line["worth_at_most"] = str(2 * costs(rng))
        demand.append(line)
    return network_document(
        sites=[
            *({"id": store, "roles": ["warehouse"], "handling_cost": "1"} for store in stores),
            *({"id": dock, "roles": ["cross_dock"], "handling_cost": "2"} for dock in crossings),
            *({"id": shop, "roles": ["ship_to"]} for shop in shops),
        ],
        supply=[
            {
                "site": store,
                "item": "GOODS",
                "quantity": str(quantity // tiers),
                "unit_cost": str(3 * tier),
            }
            for store, quantity in zip(stores, stock, strict=True)
            for tier in range(tiers)
        ],
        demand=demand,
        lanes=lanes,
    )
