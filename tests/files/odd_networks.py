"""Networks whose texts and numbers are as awkward as they are allowed to be, for files to carry."""

from collections.abc import Mapping
from typing import Any

from hypothesis import strategies as st

# Zeros in front, formulas, separators of every form, quotes, brackets, spaces, other alphabets.
AWKWARD = (
    "00123",
    "123",
    "1e5",
    "=1+1",
    "@SUM(A1)",
    "-1",
    "TRUE",
    "#N/A",
    "a,b",
    "a;b",
    "a|b",
    "[a]",
    '["a"]',
    'say "hello"',
    "'quoted",
    " before",
    "after ",
    "å Ö ß",
    "盐",
    "😀",
    "_x0041_",
    "a.b",
    "NULL",
    "2026-02-03",
    "/~1~0",
)
ids = st.sampled_from(AWKWARD) | st.text(
    st.characters(blacklist_categories=("Cc", "Cs")), min_size=1, max_size=8
)
notes = st.sampled_from(("", "=1+1", "two\nlines", "a\tb", "\r\n", "0")) | st.text(
    st.characters(blacklist_categories=("Cc", "Cs")), max_size=8
)


def decimals(places: int, *, least: int = 0) -> st.SearchStrategy[str]:
    """Return texts of numbers of up to ``places`` decimals, small ones and the largest."""

    def text(scaled: int) -> str:
        digits = str(abs(scaled)).rjust(places + 1, "0")
        whole, tail = digits[: len(digits) - places], digits[len(digits) - places :].rstrip("0")
        return ("-" if scaled < 0 else "") + whole + ("." if tail else "") + tail

    largest = 2**62 - 1
    return (
        st.integers(least, 10**6)
        | st.integers(min(least, -1) * largest if least < 0 else 0, largest)
    ).map(text)


extras = st.dictionaries(ids, notes, max_size=3)
tags = st.lists(ids, max_size=3, unique=True)


@st.composite
def documents(draw: st.DrawFn) -> Mapping[str, Any]:
    """Draw a sound definition; what costs and quantities come to does not matter here."""
    items = draw(st.lists(ids, min_size=1, max_size=3, unique=True))
    sites = draw(st.lists(ids, min_size=2, max_size=4, unique=True))
    quantities, rates = decimals(3), decimals(6, least=-(10**6))
    rate = draw(decimals(6))

    def some(fields: Mapping[str, st.SearchStrategy[Any]]) -> dict[str, Any]:
        return {name: draw(values) for name, values in fields.items() if draw(st.booleans())}

    def site(*, roles: list[str]) -> dict[str, Any]:
        fields = {
            "name": ids,
            "latitude": st.sampled_from(("-90", "61.234567", "0.000001")),
            "handling_cost": decimals(6) | st.dictionaries(st.sampled_from(items), decimals(6)),
            "tags": tags,
            "extra": extras,
        }
        return {"roles": roles, **some(fields)}

    def rules() -> list[dict[str, Any]]:
        picks = st.lists(st.sampled_from(sites), min_size=1, max_size=2, unique=True)
        return [
            {
                "rule": "closure",
                "id": "shut",
                "note": draw(notes.filter(bool)),
                "from": "2026-03-01",
                "sites": draw(st.just({}) | st.fixed_dictionaries({"ids": picks})),
                **some({"items": st.just({}) | st.fixed_dictionaries({"tag": st.just(["a|b"])})}),
            }
        ]

    return {
        "format": 1,
        "currency": "EUR",
        "cut_off": "2026-02-03T16:00:00.5+01:00",
        **some({"name": ids, "extra": extras}),
        "items": [
            {
                "id": name,
                "unit": "bag",
                "step": "0.001",
                **some({"weight_kg": decimals(6), "tags": tags, "extra": extras}),
                "value": draw(decimals(6)),
                "packs": [
                    {"unit": f"pack {number}", "contains": draw(decimals(3, least=1))}
                    for number in range(draw(st.integers(0, 2)))
                ],
            }
            for name in items
        ],
        "sites": [
            {"id": name, **site(roles=["warehouse", "cross_dock", "ship_to"])} for name in sites
        ],
        "supply": [
            {
                "site": name,
                "item": draw(st.sampled_from(items)),
                "quantity": draw(quantities),
                **some(
                    {
                        "unit_cost": rates,
                        "currency": st.sampled_from(("EUR", "NOK")),
                        "lot": ids,
                        "best_before": st.just("2026-12-31"),
                        "as_of": st.just("2026-02-03T15:52:00.123456+01:00"),
                        "keep": st.fixed_dictionaries(
                            {"quantity": decimals(3)}, optional={"priority": st.integers(1, 9)}
                        ),
                        "extra": extras,
                    }
                ),
            }
            for name in draw(st.lists(st.sampled_from(sites), unique=True))
        ],
        "demand": [
            {
                "reference": reference,
                "site": draw(st.sampled_from(sites)),
                "item": draw(st.sampled_from(items)),
                "quantity": draw(quantities),
                **some(
                    {
                        "order": ids,
                        "priority": st.integers(1, 9),
                        "origins": st.just([sites[0]]),
                        "tags": tags,
                        "extra": extras,
                    }
                ),
            }
            for reference in draw(st.lists(ids, max_size=4, unique=True))
        ],
        "lanes": [
            {
                "id": name,
                "origin": sites[0],
                "destination": draw(st.sampled_from(sites[1:])),
                **draw(
                    st.fixed_dictionaries({"unit_cost": decimals(6)})
                    | st.just({"tariff": items[0]})
                ),
                **some(
                    {
                        "item": st.sampled_from(items),
                        "capacity": quantities,
                        "carrier": ids,
                        "charges": st.just(
                            [
                                {"name": draw(ids), "basis": "unit", "rate": draw(decimals(6))},
                                {"name": "%", "basis": "value", "percent": "1", "items": items},
                            ]
                        ),
                        "tags": tags,
                        "extra": extras,
                    }
                ),
            }
            for name in draw(st.lists(ids, max_size=4, unique=True))
        ],
        "rules": rules(),
        "tariffs": [
            {
                "id": items[0],
                "basis": "unit",
                "breaks": [
                    {"from": start, "rate": rate}
                    for start in draw(st.sampled_from((("0",), ("0", "7.5"))))
                ],
                "break_type": "incremental",
                **some({"valid_from": st.just("2026-01-01"), "currency": st.just("NOK")}),
                **some({"source": ids, "version": ids, "surcharge_percent": st.just("-2.5")}),
                **some({"pay_up": st.just(value=False)}),
            }
        ],
        "exchange_rates": [
            {
                "currency": "NOK",
                "rate": draw(decimals(6, least=1)),
                **some({"per": decimals(6, least=1), "as_of": st.just("2026-02-02")}),
                **some({"source": ids}),
            }
        ],
    }
