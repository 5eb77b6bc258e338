"""A run leaves what stock was worth to it, and the next may start there."""

from pathlib import Path
from random import Random

import numpy as np
import orjson
import pytest

from service.network.canonical import read_network
from service.network.options import Options
from service.planning.flow.contraction import contract
from service.planning.model.compile import compile_network
from service.planning.outcome import CERTIFICATE_FILE, PLAN_FILE, WARM_START_FILE
from service.planning.task import plan
from service.planning.warm_start import WarmStart
from service.planning.wide import routes
from tests.factories import Document, take_in
from tests.unit.planning.routing import wide_network

Told = list[tuple[str, dict[str, int]]]


@pytest.fixture(autouse=True)
def _everything_sifts(monkeypatch: pytest.MonkeyPatch) -> None:
    """Small networks take the road of large ones."""
    monkeypatch.setattr(routes, "LANES_MIN", 1)
    monkeypatch.setattr(routes, "LANES_PER_END_MIN", 1)


def dear_and_cheap(rng: Random) -> int:
    """Draw a cost."""
    return rng.randint(100, 9_999)


def document_of(seed: int, *, unit: int = 1, ratio: float = 1.05) -> Document:
    """Return a wide network; its costs are ``unit`` times as high, stock ``ratio`` times demand."""
    return wide_network(
        Random(seed),  # noqa: S311 - draws networks, hides nothing
        origins=8,
        ends=90,
        costs=lambda rng: unit * dear_and_cheap(rng),
        ratio=ratio,
    )


def planned(document: Document, folder: Path, former: bytes | None = None) -> Told:
    """Plan ``document`` in ``folder``, from what a former run left; return what was told."""
    source, target = folder / "in", folder / "out"
    source.mkdir(parents=True)
    target.mkdir()
    report = take_in(orjson.dumps(document), source, Options())
    assert report.status == "accepted", report.faults
    if former is not None:
        (source / WARM_START_FILE).write_bytes(former)
    told: Told = []
    outcome = plan(
        source,
        Options(),
        target,
        progress=lambda phase, counts: told.append((phase, dict(counts))),
    )
    assert outcome.state == "planned", outcome
    return told


def documents(folder: Path) -> tuple[bytes, bytes]:
    """Return plan and certificate of a planned folder."""
    out = folder / "out"
    return (out / PLAN_FILE).read_bytes(), (out / CERTIFICATE_FILE).read_bytes()


def left(folder: Path) -> bytes:
    """Return what the run left."""
    return (folder / "out" / WARM_START_FILE).read_bytes()


def test_prices_are_kept_in_money_per_unit_by_where_the_stock_lies(tmp_path: Path) -> None:
    """Every stock has its price, none below what the stock costs there."""
    document = document_of(3)

    planned(document, tmp_path)

    (prices,) = WarmStart.read(tmp_path / "out" / WARM_START_FILE).prices.values()
    supplied = {row["site"] for row in document["supply"]}
    assert {name.rsplit(" ", 1)[1] for name in prices} == supplied
    assert {weights for weights, _ in prices.values()} == {0}
    money = [money for _, money in prices.values()]
    assert min(money) >= 0
    # The supply is nearly all used: at some place it is worth more than it costs.
    assert max(money) > 0


def test_scarce_stock_is_worth_what_a_step_short_weighs(tmp_path: Path) -> None:
    """Its price is told in weights, which differ from network to network, and in money."""
    document = document_of(3, ratio=0.8)

    planned(document, tmp_path)

    (prices,) = WarmStart.read(tmp_path / "out" / WARM_START_FILE).prices.values()
    assert {weights for weights, _ in prices.values()} == {1}
    # Less by the way to the place that is served last.
    assert all(-10_000 < money < 0 for _, money in prices.values())


def test_prices_do_not_depend_on_the_scale_that_costs_were_given_in(tmp_path: Path) -> None:
    """Cents or whole units, with a step of a half or a whole: the same money per unit."""
    document = document_of(3)
    halves = document_of(3)
    halves["items"][0]["step"] = "0.5"
    planned(document, tmp_path / "whole")
    planned(halves, tmp_path / "halves")

    (whole,) = WarmStart.read(tmp_path / "whole" / "out" / WARM_START_FILE).prices.values()
    (other,) = WarmStart.read(tmp_path / "halves" / "out" / WARM_START_FILE).prices.values()

    assert whole.keys() == other.keys()
    assert np.allclose(list(whole.values()), list(other.values()), rtol=1e-9, atol=1e-9)


def test_warm_run_ends_with_the_plan_of_a_cold_one(tmp_path: Path) -> None:
    """From yesterday's prices, from those of another network, from rubbish."""
    planned(document_of(3), tmp_path / "former")
    planned(document_of(4), tmp_path / "cold")
    planned(document_of(3, unit=1000), tmp_path / "dear")
    wrong_kind = b'{"format":1,"prices":{"GOODS":{"in -1 W0":[1]}}}'
    starts = {
        "former": left(tmp_path / "former"),
        "itself": left(tmp_path / "cold"),
        "dear": left(tmp_path / "dear"),
        "rubbish": b"\xff{",
        "no object": b"[]",
        "another format": b'{"format":2,"prices":{}}',
        "wrong kind": wrong_kind,
    }

    for name, former in starts.items():
        planned(document_of(4), tmp_path / name / "run", former)

        assert documents(tmp_path / name / "run") == documents(tmp_path / "cold"), name


def test_start_is_taken_up_where_places_are_known(tmp_path: Path) -> None:
    """What was left is found again by place; a place that is gone is unknown."""
    planned(document_of(3), tmp_path)
    former = WarmStart.read(tmp_path / "out" / WARM_START_FILE)
    network = read_network(tmp_path / "in" / "network.zip")
    compiled = compile_network(network, Options())
    (own,) = compiled.items
    whole = contract(own.arcs, nodes=own.node_count, lanes=own.lanes.rows.shape[0])

    found = former.by_place(network, own, whole, own.weighted(), cost_scale=compiled.cost_scale)

    assert found is not None
    assert int(np.isfinite(found).sum()) == len(next(iter(former.prices.values())))


def test_rounds_are_told_with_their_lanes(tmp_path: Path) -> None:
    """Each round, counted over all items: lanes listed, and all lanes priced."""
    told = planned(document_of(5), tmp_path)

    rounds = [counts for phase, counts in told if phase == "round"]
    assert [counts["round"] for counts in rounds] == list(range(1, len(rounds) + 1))
    assert rounds
    lanes = next(counts["lanes"] for phase, counts in told if phase == "read")
    assert all(counts["priced"] == lanes > counts["listed"] for counts in rounds)
    phases = [phase for phase, _ in told]
    assert phases.index("compiled") < phases.index("round") < phases.index("solved")


def test_network_that_is_solved_in_full_leaves_nothing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A cache that nobody would read is not written."""
    monkeypatch.setattr(routes, "LANES_MIN", 10**6)

    planned(document_of(3), tmp_path)

    assert not (tmp_path / "out" / WARM_START_FILE).exists()
