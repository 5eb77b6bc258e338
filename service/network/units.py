"""Units of measure: UN/ECE Recommendation 20 codes with exact factors, and the trade's words.

Each factor is exact by definition: the metric prefixes, the international yard and pound
agreement of 1959 (yard 0.9144 m, pound 0.45359237 kg), the United States gallon of 231 cubic
inches and the imperial gallon of 4.54609 litres. A unit whose size depends on a country or a
vintage ("ton") is left out on purpose: it would be a guess.

The second verifier has the table once more, written on its own: ``UNITS`` in
``proof/standalone.py``.
"""

from collections.abc import Mapping
from fractions import Fraction
from typing import Final

from service.network.columns import Item

# The measures of a lane or rule that are no pack; a pack may not bear their names.
MEASURES: Final = ("unit", "weight_kg", "volume_m3")


def _scaled(dimension: str, factors: Mapping[str, str]) -> dict[str, tuple[str, Fraction]]:
    """Return code -> (dimension, factor to the base unit of that dimension)."""
    return {code: (dimension, Fraction(factor)) for code, factor in factors.items()}


_INCH = Fraction("0.0254")
_GALLON_US = 231 * _INCH**3
_GALLON_UK = Fraction("0.00454609")

UNITS: Final[Mapping[str, tuple[str, Fraction]]] = {
    **_scaled(
        "mass",
        {
            "MGM": "0.000001",
            "GRM": "0.001",
            "HGM": "0.1",
            "KGM": "1",
            "DTN": "100",
            "TNE": "1000",
            "2U": "1000",
            "KTN": "1000000",
            "ONZ": "0.028349523125",
            "LBR": "0.45359237",
            "STI": "6.35029318",
            "CWA": "45.359237",
            "CWI": "50.80234544",
            "STN": "907.18474",
            "LTN": "1016.0469088",
        },
    ),
    **_scaled(
        "volume",
        {
            "MMQ": "0.000000001",
            "CMQ": "0.000001",
            "MLT": "0.000001",
            "CLT": "0.00001",
            "DLT": "0.0001",
            "DMQ": "0.001",
            "LTR": "0.001",
            "HLT": "0.1",
            "MTQ": "1",
        },
    ),
    "INQ": ("volume", _INCH**3),
    "FTQ": ("volume", (12 * _INCH) ** 3),
    "YDQ": ("volume", (36 * _INCH) ** 3),
    "GLL": ("volume", _GALLON_US),
    "QTL": ("volume", _GALLON_US / 4),
    "PTL": ("volume", _GALLON_US / 8),
    "BLL": ("volume", _GALLON_US * 42),
    "GLI": ("volume", _GALLON_UK),
    "QTI": ("volume", _GALLON_UK / 4),
    "PTI": ("volume", _GALLON_UK / 8),
    **_scaled(
        "length",
        {
            "MMT": "0.001",
            "CMT": "0.01",
            "DMT": "0.1",
            "MTR": "1",
            "KTM": "1000",
            "INH": "0.0254",
            "FOT": "0.3048",
            "YRD": "0.9144",
        },
    ),
    **_scaled(
        "area",
        {
            "MMK": "0.000001",
            "CMK": "0.0001",
            "DMK": "0.01",
            "MTK": "1",
            "HAR": "10000",
            "KMK": "1000000",
            "INK": "0.00064516",
            "FTK": "0.09290304",
            "YDK": "0.83612736",
        },
    ),
    **_scaled(
        "count",
        {
            "C62": "1",
            "H87": "1",
            "EA": "1",
            "NAR": "1",
            "PR": "2",
            "DZN": "12",
            "SC": "20",
            "DPR": "24",
            "CEN": "100",
            "GRO": "144",
            "MIL": "1000",
            "T3": "1000",
            "GGR": "1728",
        },
    ),
}

TRADE_WORDS: Final[Mapping[str, str]] = {
    "mg": "MGM",
    "g": "GRM",
    "gram": "GRM",
    "kg": "KGM",
    "kilogram": "KGM",
    "t": "TNE",
    "tonne": "TNE",
    "oz": "ONZ",
    "lb": "LBR",
    "pound": "LBR",
    "ml": "MLT",
    "cl": "CLT",
    "dl": "DLT",
    "l": "LTR",
    "litre": "LTR",
    "hl": "HLT",
    "m3": "MTQ",
    "cubic metre": "MTQ",
    "mm": "MMT",
    "cm": "CMT",
    "m": "MTR",
    "metre": "MTR",
    "km": "KTM",
    "kilometre": "KTM",
    "m2": "MTK",
    "square metre": "MTK",
    "piece": "H87",
    "each": "EA",
    "one": "C62",
    "pair": "PR",
    "dozen": "DZN",
    "gross": "GRO",
    "hundred": "CEN",
    "thousand": "MIL",
}


def standard_unit(word: str) -> tuple[str, Fraction] | None:
    """Return (dimension, factor to its base unit) of a code or trade word, or None if unknown."""
    return UNITS.get(TRADE_WORDS.get(word, word))


def item_units(item: Item, unit: str) -> Fraction | None:
    """Return how many item units one ``unit`` is, or None where ``unit`` says nothing of it.

    The item's own unit and packs come first, then standard units of the item unit's dimension.
    """
    if unit == item.unit:
        return Fraction(1)
    for pack in item.packs:
        if pack.unit == unit:
            return pack.contains
    of_row, of_item = standard_unit(unit), standard_unit(item.unit)
    if of_row is None or of_item is None or of_row[0] != of_item[0]:
        return None
    return of_row[1] / of_item[1]


def per_unit(item: Item, measure: str) -> Fraction | None:
    """Return how much of ``measure`` one item unit is, or None where the item does not say.

    ``measure`` is ``unit``, ``weight_kg``, ``volume_m3`` or a pack, of which a unit is 1/contains.
    """
    if measure == "unit":
        return Fraction(1)
    if measure == "weight_kg":
        return item.weight_kg
    if measure == "volume_m3":
        return item.volume_m3
    for pack in item.packs:
        if pack.unit == measure:
            return 1 / pack.contains
    return None
