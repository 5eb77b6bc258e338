"""What a shipment costs by a tariff: values worked out by hand, and a second way of pricing."""

from fractions import Fraction
from itertools import pairwise
from random import Random
from typing import Any

import pytest

from service.network.columns import Item, Pack
from service.network.freight import freight, rising_runs
from service.network.tariffs import Tariff, tariff_of
from service.proof import freight as proof
from service.proof.standalone import Tariff as StandaloneTariff
from tests.random_tariffs import draw_tariff, shipment_costs

BREAKS = [
    {"from": "0", "rate": "5"},
    {"from": "100", "rate": "4"},
    {"from": "500", "rate": "3"},
]


def normal(**fields: Any) -> dict[str, Any]:  # noqa: ANN401 - any field of a tariff
    """Return a tariff by weight in normal form."""
    return {"id": "T", "basis": "weight", "breaks": BREAKS, **fields}


def cost(quantity: str, **fields: Any) -> Fraction:  # noqa: ANN401 - any field of a tariff
    """Return what so many kilograms cost."""
    return freight(tariff_of(normal(**fields)), Fraction(quantity)).amount


@pytest.mark.parametrize(
    ("quantity", "incremental", "all_units", "pay_up"),
    [
        # By hand: 100 at 5, the next 400 at 4, the rest at 3; or all of it at one rate; or, where
        # that is less, as much as the next break at its rate (80 kg as 100 kg at 4).
        ("0", "0", "0", "0"),
        ("50", "250", "250", "250"),
        ("80", "400", "400", "400"),
        ("90", "450", "450", "400"),
        ("100", "500", "400", "400"),
        ("101", "504", "404", "404"),
        ("400", "1700", "1600", "1500"),
        ("500", "2100", "1500", "1500"),
        ("600", "2400", "1800", "1800"),
    ],
)
def test_breaks_are_priced_as_stated(
    quantity: str, incremental: str, all_units: str, pay_up: str
) -> None:
    """The three ways in which carriers read one table of breaks (common practice, no source)."""
    assert cost(quantity, break_type="incremental") == Fraction(incremental)
    assert cost(quantity, break_type="all_units") == Fraction(all_units)
    assert cost(quantity, break_type="all_units", pay_up=True) == Fraction(pay_up)


@pytest.mark.parametrize(
    ("fields", "quantity", "expected"),
    [
        # The minimum is due before the surcharge: max(5 * 4, 45) = 45, and 10 % more.
        ({"minimum_charge": "45", "surcharge_percent": "10"}, "4", "49.5"),
        ({"minimum_charge": "45"}, "0", "0"),
        ({"minimum_charge": "45"}, "10", "50"),
        ({"surcharge_percent": "-20"}, "10", "40"),
        # 14.625 kg are charged as 15 (seen on a carrier's page), and 10 as 10.
        ({"round_up_to": "1"}, "14.625", "75"),
        ({"round_up_to": "1"}, "10", "50"),
        ({"round_up_to": "100"}, "0.001", "500"),
        # Money is rounded last, half upwards: 1.005 kg cost 5.025, and 12.5 % more is 5.653125.
        ({"round_money": "0.01"}, "1.005", "5.03"),
        ({"round_money": "0.01", "surcharge_percent": "12.5"}, "1.005", "5.65"),
        ({"round_money": "1"}, "0.1", "1"),
        ({"round_money": "1"}, "0.05", "0"),
    ],
)
def test_minimum_surcharge_and_roundings_come_in_this_order(
    fields: dict[str, str], quantity: str, expected: str
) -> None:
    """Quantity up, breaks, minimum, surcharge, money (worked out by hand)."""
    assert cost(quantity, break_type="incremental", **fields) == Fraction(expected)


def item(weight_kg: str, volume_m3: str, **packs: str) -> Item:
    """Return an item of this weight and volume."""
    return Item(
        id="I",
        unit="piece",
        step=Fraction(1),
        name=None,
        gtin=None,
        weight_kg=Fraction(weight_kg),
        volume_m3=Fraction(volume_m3),
        packs=tuple(Pack(unit=unit, contains=Fraction(size)) for unit, size in packs.items()),
        tags=(),
        extra={},
    )


def by_volume_weight(kg_per_m3: str) -> Tariff:
    """Return a tariff by chargeable weight."""
    return tariff_of(normal(basis="chargeable_weight", kg_per_m3=kg_per_m3, breaks=BREAKS[:1]))


@pytest.mark.parametrize(
    ("kg_per_m3", "weight", "volume", "expected"),
    [
        # Air freight, cm3 / 6,000: 150 x 100 x 110 cm are 275 kg (seen: a carrier's page).
        ("166.666667", "120", "1.65", "275.00000055"),
        # Rounded factors differ: 0.45 m3 at 167 are 75.15 kg, by 6,000 they are 75 (recomputed).
        ("167", "60", "0.45", "75.15"),
        # Road, 1 m3 = 333 kg; sea LCL, 1 m3 = 1,000 kg (seen: two carriers' pages each).
        ("333", "100", "1", "333"),
        ("1000", "850", "2.5", "2500"),
        # Heavy goods go by their weight.
        ("333", "500", "1", "500"),
    ],
)
def test_chargeable_weight_is_the_greater_of_weight_and_volume(
    kg_per_m3: str, weight: str, volume: str, expected: str
) -> None:
    """How many kilograms a cubic metre counts as is the tariff's to say: there is no one value."""
    goods = [(item(weight, volume), Fraction(1))]

    assert by_volume_weight(kg_per_m3).measured(goods) == Fraction(expected)
    document = {"basis": "chargeable_weight", "kg_per_m3": kg_per_m3, "id": "T"}
    assert proof.measure_of_goods(document, goods) == Fraction(expected)


def test_a_shipment_is_measured_as_a_whole() -> None:
    """100 kg on 1 m3 and 500 kg on 1 m3 are 600 kg or 666 kg, not 333 and 500."""
    goods = [(item("100", "1"), Fraction(1)), (item("500", "1"), Fraction(1))]

    assert by_volume_weight("333").measured(goods) == 666


@pytest.mark.parametrize(
    ("pallets", "metres"),
    # An EU pallet of 1,200 x 800 mm takes 0.4 loading metres (1.2 * 0.8 / 2.4), an industrial one
    # of 1,200 x 1,000 mm 0.5; 33 of the first are 13.2 of the 13.6 of a semi-trailer (seen: five
    # carriers' pages, recomputed).
    [("1", "0.4"), ("33", "13.2"), ("34", "13.6")],
)
def test_loading_metres_are_a_pack_like_any_other(pallets: str, metres: str) -> None:
    """40 bags a pallet of 0.4 metres: 100 bags are one loading metre."""
    tariff = tariff_of(normal(basis="loading_metre", breaks=BREAKS[:1]))
    goods = [(item("25", "0.02", pallet="40", loading_metre="100"), Fraction(pallets) * 40)]

    assert tariff.measured(goods) == Fraction(metres)


def drawn(seed: int) -> dict[str, Any]:
    """Return a random tariff in its normal form, in which what says nothing is left out."""
    tariff = draw_tariff(Random(seed), seed, rising=seed % 3 == 0)  # noqa: S311 - repeatable
    for one in tariff["breaks"]:
        one |= {key: text.removesuffix(".0") for key, text in one.items()}
    return tariff


@pytest.mark.parametrize("seed", range(60))
def test_four_ways_of_pricing_agree(seed: int) -> None:
    """Planning, proof, stand-alone verifier and the tests each have their own."""
    document = drawn(seed)
    tariff, alone = tariff_of(document), StandaloneTariff(document)

    for number in range(0, 300, 7):
        amount = Fraction(number, 4)
        expected = shipment_costs(document, amount)
        assert freight(tariff, amount).amount == expected
        assert proof.bill(document, amount).amount == expected
        assert alone.price(amount)[1] == expected


@pytest.mark.parametrize("seed", range(120))
def test_steps_are_found_to_rise_where_they_do(seed: int) -> None:
    """Against all differences over so many steps that every break and minimum is passed."""
    rng = Random(seed)  # noqa: S311 - repeatable
    document = drawn(seed)
    of_step = rng.choice([Fraction(1), Fraction(1, 4), Fraction(25), Fraction("25.2"), Fraction(3)])
    tariff, alone = tariff_of(document), StandaloneTariff(document)
    last = max(Fraction(one["from"]) for one in document["breaks"]) + 4500
    count = min(int(last / of_step) + 3, 4000)
    costs = [shipment_costs(document, number * of_step) for number in range(count)]
    further = [after - before for before, after in pairwise(costs)]
    rises = all(former <= latter for former, latter in pairwise(further))

    runs = rising_runs(tariff, of_step)

    assert (runs is not None) == rises
    assert proof.rises(document, of_step) == rises
    assert alone.only_rises(of_step) == rises
    if runs is None:
        return
    flat = [run.money for run in runs for _ in range(run.width or count)][: len(further)]
    assert flat == further
    assert all(former.money < latter.money for former, latter in pairwise(runs))
