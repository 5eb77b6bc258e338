"""A plan in two currencies with duty, worked out by hand."""

from typing import Any

from tests.factories import Document, network_document, plan_network


def salt_over_the_border() -> Document:
    """Return 40 bags at the north depot, 60 at the south one, and a yard that wants 70.

    North: 10 NOK a bag at 0.08 EUR, so 0.80 EUR; duty 2.5 % of 4 EUR is 0.10 EUR, and a fee of 5
    JPY for each of its 25 kg at 1/160 EUR is 0.78125 EUR: 1.68125 EUR a bag. South: 2 EUR a bag,
    of which supply is 8 PLN at a quarter: 2 EUR; so 4 EUR a bag.
    """
    document = network_document(
        items=[{"id": "SALT", "unit": "bag", "weight_kg": "25", "value": "4"}],
        sites=[
            {"id": "NORTH", "roles": ["warehouse"]},
            {"id": "SOUTH", "roles": ["warehouse"]},
            {"id": "YARD", "roles": ["ship_to"]},
        ],
        supply=[
            {"site": "NORTH", "item": "SALT", "quantity": "40"},
            {"site": "SOUTH", "item": "SALT", "quantity": "60", "unit_cost": 8, "currency": "PLN"},
        ],
        demand=[{"reference": "1", "site": "YARD", "item": "SALT", "quantity": "70"}],
        lanes=[
            {
                "id": "N",
                "origin": "NORTH",
                "destination": "YARD",
                "unit_cost": "10",
                "currency": "NOK",
                "charges": [
                    {"name": "fee", "basis": "weight", "rate": "5", "currency": "JPY"},
                    {"name": "duty", "basis": "value", "percent": "2.5"},
                ],
            },
            {"id": "S", "origin": "SOUTH", "destination": "YARD", "unit_cost": "2"},
        ],
        currency="EUR",
    )
    document["exchange_rates"] = [
        {"currency": "PLN", "rate": "1", "per": "4"},
        {"currency": "NOK", "rate": "0.08", "as_of": "2026-02-02", "source": "central bank"},
        {"currency": "JPY", "rate": "0.625", "per": "100"},
        {"currency": "SEK", "rate": "0.09"},
    ]
    return document


def test_both_amounts_stand_on_the_plan() -> None:
    """40 bags by the cheaper north: 32 transport, 35.25 charges; 30 by the south: 60 and 60."""
    planned = plan_network(salt_over_the_border())

    plan = planned.plan
    assert plan["cost_parts"]["transport"] == "92"
    assert plan["cost_parts"]["charges"] == "35.25"
    assert plan["cost_parts"]["supply"] == "60"
    assert plan["total_cost"] == "187.25"
    north, south = plan["plan_lines"]
    assert north | {"stated": 0, "charge_parts": 0} == {
        "lane": "N",
        "origin": "NORTH",
        "destination": "YARD",
        "item": "SALT",
        "quantity": "40",
        "unit_cost": "0.8",
        "transport_cost": "32",
        "supply_cost": "0",
        "handling_cost": "0",
        "charges": "35.25",
        "cost": "67.25",
        "stated": 0,
        "charge_parts": 0,
    }
    assert north["stated"] == {"currency": "NOK", "transport_cost": "400"}
    assert north["charge_parts"] == [
        {"name": "duty", "cost": "4"},
        {"name": "fee", "cost": "31.25", "currency": "JPY", "stated_cost": "5000"},
    ]
    assert "stated" not in south
    assert "charge_parts" not in south
    assert plan["consignments"][0]["cost"] == "67.25"


def test_the_table_of_currencies_has_the_rates_that_were_used() -> None:
    """A currency in which nothing is paid is not listed."""
    rows = plan_network(salt_over_the_border()).plan["currencies"]

    assert [row["currency"] for row in rows] == ["JPY", "NOK", "PLN"]
    assert rows[1] == {
        "currency": "NOK",
        "rate": "0.08",
        "per": "1",
        "as_of": "2026-02-02",
        "source": "central bank",
        "supply": "0",
        "transport": "400",
        "charges": "0",
        "amount": "400",
        "converted": "32",
    }
    assert (rows[0]["charges"], rows[0]["converted"]) == ("5000", "31.25")
    assert (rows[2]["supply"], rows[2]["converted"]) == ("240", "60")


def test_stock_of_one_cost_in_two_currencies_is_told_apart() -> None:
    """8 PLN and 2 EUR cost the same; what is drawn of each is still known, and which is drawn."""
    document = salt_over_the_border()
    document["supply"].append(
        {"site": "SOUTH", "item": "SALT", "quantity": "5", "unit_cost": "2", "currency": "EUR"}
    )

    planned = plan_network(document)

    draws = {(row["site"], row["tier"]) for row in planned.certificate["items"][0]["draws"]}
    pln = next(row for row in planned.plan["currencies"] if row["currency"] == "PLN")
    assert planned.plan["cost_parts"]["supply"] == "60"
    assert ("SOUTH", 2) in draws
    assert pln["supply"] in {"200", "240"}


def test_a_network_without_other_money_has_no_word_of_it() -> None:
    """What is not used is absent, so that plans made before stay as they were."""
    document: dict[str, Any] = salt_over_the_border()
    del document["exchange_rates"], document["supply"][1]
    document["lanes"][0] = {"id": "N", "origin": "NORTH", "destination": "YARD", "unit_cost": "1"}

    plan = plan_network(document).plan

    assert "currencies" not in plan
    assert not {"stated", "charge_parts"} & set(plan["plan_lines"][0])
