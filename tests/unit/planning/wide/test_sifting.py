"""Sifting ends with the plan and the certificate of the full solve, byte for byte."""

from collections.abc import Callable
from fractions import Fraction
from random import Random
from typing import Any, NoReturn

import numpy as np
import pytest

from service.network.options import read_options
from service.planning.flow.contraction import Contraction
from service.planning.model.arcs import MoneyArray
from service.planning.model.compile import compile_network
from service.planning.model.item_network import ItemNetwork
from service.planning.model.limits import NoCirculationError
from service.planning.solve import solve_item
from service.planning.wide import sifting
from service.planning.wide.routes import FullRoute, Route, SiftedRoute, chosen_route
from service.planning.wide.sieve import fits
from tests.factories import network_document
from tests.random_networks import draw_network
from tests.random_witness import plain_text
from tests.unit.planning.routing import Seen, agree, compiled, wide_network


def random(seed: int) -> Random:
    """Return randomness that is the same at every run."""
    return Random(seed)  # noqa: S311 - draws networks, hides nothing


def plain(rng: Random) -> int:
    """Draw a cost that hardly ever occurs twice."""
    return rng.randint(100, 9_999)


def few(rng: Random) -> int:
    """Draw one of five costs: almost every plan has others as good."""
    return rng.randint(1, 5)


KINDS: dict[str, dict[str, Any]] = {
    "plain": {},
    "capped": {"capped": 0.3},
    "forced": {"forced": 0.02},
    "parallel": {"carriers": 3, "capped": 0.3},
    "ragged": {"density": 0.4},
    "through_docks": {"docks": 4},
    "tiers": {"tiers": 3},
    "supply_is_demand": {"ratio": 1.0},
    "too_little": {"ratio": 0.8},
    "priorities": {"ratio": 0.8, "claims": True, "docks": 2, "capped": 0.2},
    "priorities_with_enough": {"ratio": 1.3, "claims": True, "tiers": 2},
}


@pytest.mark.parametrize("costs", [plain, few])
@pytest.mark.parametrize("kind", sorted(KINDS))
def test_every_kind_of_network_ends_as_the_full_solve_does(
    kind: str, costs: Callable[[Random], int]
) -> None:
    """Twelve origins, 120 ends; seeds that no setting was tuned on."""
    seen = Seen()
    for seed in (101, 102):
        document = wide_network(random(seed), origins=12, ends=120, costs=costs, **KINDS[kind])

        agree(document, seen.front())

    assert seen.rounds


def test_random_networks_with_every_feature_end_as_the_full_solve_does() -> None:
    """Rules, packs, tiers, kept stock, origins, forced loops: most of them by sifting alone."""
    seen = Seen()
    planned = 0
    for seed in range(900, 990):
        network = draw_network(random(seed), sites=6, walks=12)
        try:
            agree(network.document, seen.front(), **network.options)
        except NoCirculationError:
            continue
        planned += 1

    assert planned > 60
    assert sum(seen.sifted) > 0.7 * len(seen.sifted)
    assert max(number for number, _, _ in seen.rounds) > 2


def test_money_beyond_32_bits_is_sifted_as_exactly() -> None:
    """Rates of thousands with six decimals: costs and prices need 64 bits, weights nearly all."""
    seen = Seen()
    sifting = seen.front()

    def front(own: ItemNetwork, contraction: Contraction, weighted: MoneyArray) -> Route:
        # What does not fit is never sifted; routes.py decides it so.
        route = sifting if fits(weighted, contraction) else FullRoute
        return route(own, contraction, weighted)

    for seed in range(990, 1020):
        network = draw_network(random(seed), sites=6, walks=12)
        for lane in network.document["lanes"]:
            dearer = Fraction(lane["unit_cost"]) * 1000 + Fraction(1, 10**6)
            lane["unit_cost"] = plain_text(dearer, decimals=6)

        try:
            agree(network.document, front, **network.options)
        except NoCirculationError:
            continue

    assert sum(seen.sifted) > 20


def test_place_whose_only_lane_has_no_room_is_short_as_in_the_full_solve() -> None:
    """Its price is near the limit, where sums of prices were once widened beyond 64 bits."""
    document = network_document(
        sites=[{"id": "W", "roles": ["warehouse"]}, {"id": "S", "roles": ["ship_to"]}],
        supply=[],
        demand=[{"reference": "D", "site": "S", "item": "GOODS", "quantity": "24"}],
        lanes=[{"origin": "W", "destination": "S", "unit_cost": "1", "capacity": "0"}],
    )
    document["lanes"][0]["item"] = "GOODS"

    agree(document, Seen().front())


def test_layout_of_one_long_row_leaves_the_costs_as_they_are() -> None:
    """Costs beyond 32 bits into one place lie in the columns as the layout wants them."""
    document = network_document(
        sites=[
            {"id": "W", "roles": ["warehouse"]},
            {"id": "S", "roles": ["ship_to"], "handling_cost": "1.28"},
        ],
        supply=[{"site": "W", "item": "GOODS", "quantity": "9"}],
        demand=[{"reference": "D", "site": "S", "item": "GOODS", "quantity": "5"}],
        lanes=[{"origin": "W", "destination": "S", "unit_cost": "4360000.526235", "capacity": "7"}],
    )

    agree(document, Seen().front())


def test_lists_too_short_for_a_plan_grow_until_none_is_better(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """One lane a place leaves goods missing at first; each round brings in what helps."""
    monkeypatch.setattr(sifting, "LISTED_LANES", 0.5)
    monkeypatch.setattr(sifting, "ROUNDS_MAX", 200)
    monkeypatch.setattr(sifting, "JOINING", 1)
    seen = Seen()

    for seed in (111, 112, 113):
        agree(
            wide_network(random(seed), origins=10, ends=80, costs=plain, capped=0.2), seen.front()
        )

    assert all(seen.sifted)
    assert max(number for number, _, _ in seen.rounds) >= 4
    assert all(listed < 800 for _, listed, _ in seen.rounds)


def test_full_solve_decides_where_rounds_run_out(monkeypatch: pytest.MonkeyPatch) -> None:
    """With one round and far too short a list nothing is proved, and yet the plan is the plan."""
    monkeypatch.setattr(sifting, "LISTED_LANES", 0.5)
    monkeypatch.setattr(sifting, "ROUNDS_MAX", 1)
    seen = Seen()

    agree(wide_network(random(121), origins=10, ends=80, costs=plain), seen.front())

    assert seen.sifted == [False]


@pytest.mark.parametrize(
    "start", ["right", "zero", "high", "random", "infinite", "not a number", "negative"]
)
def test_prices_to_start_from_decide_only_where_the_search_starts(start: str) -> None:
    """Right or absurd, a former run's prices leave no trace."""
    rng = np.random.default_rng(5)
    given = {
        "right": np.full(10, 40.0),
        "zero": np.zeros(10),
        "high": np.full(10, 1e7),
        "random": rng.uniform(0, 1e5, 10),
        "infinite": np.full(10, np.inf),
        "not a number": np.full(10, np.nan),
        "negative": np.full(10, -1e9),
    }[start]
    seen = Seen()
    for kind in ("plain", "capped", "too_little"):
        document = wide_network(random(131), origins=10, ends=90, costs=plain, **KINDS[kind])

        agree(document, seen.front(start=given))

    assert seen.rounds


def test_network_without_a_plan_is_the_full_solve_to_say() -> None:
    """Shortages forbidden and too little stock: the same set of places contradicts itself."""
    document = wide_network(random(141), origins=6, ends=40, costs=plain, ratio=0.9)
    made, _ = compiled(document, shortages="forbid")
    (own,) = made.items
    seen = Seen()

    with pytest.raises(NoCirculationError) as full:
        solve_item(made.network, own, front=FullRoute)
    with pytest.raises(NoCirculationError) as sifted:
        solve_item(made.network, own, front=seen.front())

    assert np.array_equal(full.value.places, sifted.value.places)
    assert full.value.forced_out == sifted.value.forced_out


class Reached(Exception):  # noqa: N818 - no error: it ends the solve where enough is known
    """Ends a solve."""


def test_route_is_chosen_by_what_pays() -> None:
    """Sifted: many lanes into each place. Solved at once: few, few into each, few places."""
    options, _ = read_options({})
    assert options is not None
    chosen = []
    for origins, ends in ((60, 600), (60, 40), (6, 5_500), (200, 200)):
        document = wide_network(random(151), origins=origins, ends=ends, costs=plain)
        made, _ = compiled(document)
        (own,) = compile_network(made.network, options).items

        def front(*item: Any) -> NoReturn:  # noqa: ANN401 - the arguments of a front
            chosen.append(type(chosen_route(*item)))
            raise Reached

        with pytest.raises(Reached):
            solve_item(made.network, own, front=front)

    assert chosen == [SiftedRoute, FullRoute, FullRoute, FullRoute]
