"""Units: exact factors by definition, and no guesses."""

from fractions import Fraction

import pytest

from service.network.columns import Item, Pack
from service.network.units import TRADE_WORDS, UNITS, item_units, per_unit, standard_unit

# UN/ECE Recommendation 20 as published: code, name, and its factor to the first of its kind.
# kg, g, t, m3, l, m, km, piece and one are exact by the SI or by counting.
PUBLISHED = [
    ("GRM", "KGM", Fraction(1, 1000)),
    ("TNE", "KGM", Fraction(1000)),
    ("LTR", "MTQ", Fraction(1, 1000)),
    ("KTM", "MTR", Fraction(1000)),
    ("H87", "C62", Fraction(1)),
    # International yard and pound agreement of 1959: 1 lb = 0.45359237 kg, 1 yd = 0.9144 m.
    ("LBR", "KGM", Fraction("0.45359237")),
    ("YRD", "MTR", Fraction("0.9144")),
    ("ONZ", "LBR", Fraction(1, 16)),
    ("STN", "LBR", Fraction(2000)),
    ("LTN", "LBR", Fraction(2240)),
    ("CWI", "LBR", Fraction(112)),
    ("CWA", "LBR", Fraction(100)),
    ("STI", "LBR", Fraction(14)),
    ("FOT", "YRD", Fraction(1, 3)),
    ("INH", "FOT", Fraction(1, 12)),
    # NIST Handbook 44, appendix C: the gallon is 231 cubic inches, exactly 3.785 411 784 litres.
    ("GLL", "LTR", Fraction("3.785411784")),
    ("BLL", "GLL", Fraction(42)),
    ("FTQ", "MTQ", Fraction("0.028316846592")),
    # Units of Measurement Regulations 1995 (UK): the gallon is 4.546 09 litres.
    ("GLI", "LTR", Fraction("4.54609")),
    ("DZN", "C62", Fraction(12)),
    ("GRO", "DZN", Fraction(12)),
]


def item(unit: str, **changes: object) -> Item:
    """Return an item in ``unit`` with a pallet of 48."""
    values = {
        "id": "SALT",
        "unit": unit,
        "step": Fraction(1),
        "name": None,
        "gtin": None,
        "weight_kg": None,
        "volume_m3": None,
        "packs": (Pack(unit="pallet", contains=Fraction(48)),),
        "tags": (),
        "extra": {},
    }
    return Item(**values | changes)  # type: ignore[arg-type] # each change is of its field's type


@pytest.mark.parametrize(("code", "base", "factor"), PUBLISHED)
def test_factors_are_exact_by_definition(code: str, base: str, factor: Fraction) -> None:
    """A factor that is rounded makes a total that nobody can check."""
    dimension, value = UNITS[code]
    base_dimension, base_value = UNITS[base]

    assert dimension == base_dimension
    assert value / base_value == factor


@pytest.mark.parametrize(
    ("code", "word"), [("KGM", "kg"), ("MTQ", "m3"), ("LTR", "l"), ("H87", "piece"), ("TNE", "t")]
)
def test_trade_words_mean_their_code(code: str, word: str) -> None:
    """People write kg, systems write KGM."""
    assert standard_unit(word) == standard_unit(code)
    assert standard_unit(code) is not None


def test_every_trade_word_leads_to_a_unit() -> None:
    """A word that leads nowhere would be refused without reason."""
    assert all(code in UNITS for code in TRADE_WORDS.values())


@pytest.mark.parametrize("word", ["ton", "TON", "Kg", "", "bag", "pallet"])
def test_words_of_uncertain_size_are_unknown(word: str) -> None:
    """A ton is 907, 1000 or 1016 kg; a bag is whatever the item says."""
    assert standard_unit(word) is None


@pytest.mark.parametrize(
    ("unit", "row_unit", "factor"),
    [
        ("bag", "bag", Fraction(1)),
        ("bag", "pallet", Fraction(48)),
        ("bag", "kg", None),
        ("kg", "TNE", Fraction(1000)),
        ("KGM", "kg", Fraction(1)),
        ("l", "MTQ", Fraction(1000)),
        ("l", "kg", None),
        ("piece", "dozen", Fraction(12)),
    ],
)
def test_rows_may_use_the_items_unit_its_packs_or_a_unit_of_its_kind(
    unit: str, row_unit: str, factor: Fraction | None
) -> None:
    """Kilograms of an item that is counted in bags would be a guess."""
    assert item_units(item(unit), row_unit) == factor


def test_a_measure_per_unit_is_what_the_item_says() -> None:
    """A unit is 1/contains of a pack; a missing weight stays missing."""
    salt = item("bag", weight_kg=Fraction("25.2"))

    assert per_unit(salt, "unit") == 1
    assert per_unit(salt, "weight_kg") == Fraction("25.2")
    assert per_unit(salt, "volume_m3") is None
    assert per_unit(salt, "pallet") == Fraction(1, 48)
    assert per_unit(salt, "layer") is None
