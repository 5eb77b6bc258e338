"""Documents read by array operations have the outcome of the exact reader, to the last fault."""

import json
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.network.canonical import network_digest
from service.network.faults import in_order
from service.network.files.json import ReadJson, read_json
from service.network.files.json_tables import cut_tables
from service.network.options import Options
from service.network.reading import read_network
from service.network.table_fields import FLAT_FIELDS
from tests.network_samples import sound
from tests.unit.network.test_scanned import ODD, STYLES


def outcome(read: ReadJson, options: Options) -> object:
    """Return all that a reader of a network says of it."""
    if read.unreadable or read.invalid:
        return read.unreadable, read.invalid
    reading = read_network(read.value, options)
    faults = reading.faults
    return (
        in_order(faults.kept, read.value),
        faults.count,
        faults.cautions,
        reading.set_aside,
        reading.counts,
        None if reading.network is None else network_digest(reading.network),
    )


def both(text: bytes, *, set_aside: bool = False) -> tuple[object, object]:
    """Return what the exact reader says of a text, and what it says with scanned tables."""
    options = Options(bad_rows="set_aside" if set_aside else "refuse")
    exact = outcome(read_json(text, nesting_max=16), options)
    fast = read_json(text, nesting_max=16, tables=FLAT_FIELDS, large_bytes=0)
    return exact, outcome(fast, options)


def as_columns(rows: Sequence[dict[str, Any]]) -> dict[str, list[Any]]:
    """Return rows as columns."""
    names = dict.fromkeys(name for row in rows for name in row)
    return {name: [row.get(name) for row in rows] for name in names}


def lanes_of(form: str) -> object:
    """Return the lanes of the sample in one of the forms."""
    rows = sound()["lanes"]
    grid = {
        "origins": ["DEP-NORTH", "X"],
        "destinations": ["YARD-07", "X"],
        "unit_cost": [["0.215", 3], [0.5, None]],
        "capacity": [[2000, None], ["7.5", None]],
        "per": "item",
    }
    forms: dict[str, Callable[[], object]] = {
        "rows": lambda: rows,
        "columns": lambda: as_columns(rows),
        "table": lambda: grid,
        "tables": lambda: [grid, {**grid, "unit_cost": [[1, 2], [3, None]], "carrier": "C"}],
    }
    return forms[form]()


FORMS = ("rows", "columns", "table", "tables")


def document(form: str) -> dict[str, Any]:
    """Return the sample with its lanes, order lines and stock in one form."""
    made = sound()
    made["lanes"] = lanes_of(form)
    del made["control"]
    if form != "rows":
        made["demand"], made["supply"] = as_columns(made["demand"]), as_columns(made["supply"])
    return made


@pytest.mark.parametrize("form", FORMS)
def test_the_tables_of_the_sample_are_scanned(form: str) -> None:
    """The other tests would compare the exact reader with itself if nothing were cut out."""
    text = json.dumps(document(form)).encode()

    rest, cuts = cut_tables(text, FLAT_FIELDS, json.loads, large_bytes=0)

    assert cuts
    assert len(rest) < len(text)


places = st.floats(min_value=0, max_value=1, exclude_max=True)


@given(
    form=st.sampled_from(FORMS),
    style=st.sampled_from(STYLES),
    token=st.none() | st.sampled_from(ODD),
    where=places,
    set_aside=st.booleans(),
)
def test_a_changed_value_has_one_outcome(
    form: str,
    style: dict[str, Any],
    token: str | None,
    where: float,
    set_aside: bool,  # noqa: FBT001 - drawn by its name
) -> None:
    """Same digest or same faults, whatever stands in the place of any one value."""
    made = document(form)
    mark = "MARK"
    slots = list(_slots(made))
    if token is not None:
        holder, key = slots[int(where * len(slots))]
        holder[key] = mark
    text = json.dumps(made, ensure_ascii=False, **style).replace(f'"{mark}"', token or mark)

    exact, fast = both(text.encode(), set_aside=set_aside)

    assert fast == exact


def _slots(value: Any) -> Any:  # noqa: ANN401 - JSON
    """Yield every (container, key) of a document's tables that holds no container."""
    waiting = [value[name] for name in ("lanes", "demand", "supply")]
    while waiting:
        holder = waiting.pop()
        keys = holder if isinstance(holder, dict) else range(len(holder))
        for key in keys:
            if isinstance(holder[key], dict | list):
                waiting.append(holder[key])
            else:
                yield holder, key


@given(
    form=st.sampled_from(FORMS),
    style=st.sampled_from(STYLES),
    where=places,
    size=st.integers(min_value=0, max_value=3),
    patch=st.sampled_from(
        [
            *'"\\,:[]{} \t\n01-.eE#a\0',
            "",
            "null",
            "[]",
            "{}",
            '":"',
            "},{",
            "]]",
            "\xff",
            "é",
            "\\u0061",
        ]
    ),
)
def test_a_damaged_text_has_one_outcome(
    form: str, style: dict[str, Any], where: float, size: int, patch: str
) -> None:
    """Same digest or same faults, whatever happens to a few bytes anywhere."""
    text = json.dumps(document(form), **style).encode()
    place = int(where * len(text))
    damaged = text[:place] + patch.encode("latin-1") + text[place + size :]

    exact, fast = both(damaged)

    assert fast == exact


def test_faults_in_scanned_tables_point_to_their_rows(tmp_path: Path) -> None:
    """Unknown sites, too many decimals and negative numbers are found without a list of values."""
    del tmp_path
    count = 400
    lanes = {
        "origin": ["DEP-NORTH"] * count,
        "destination": ["YARD-07"] * (count - 1) + ["NOWHERE"],
        "item": ["ROAD-25"] * count,
        "carrier": [f"C-{number}" for number in range(count)],
        "unit_cost": [f"{number}.5" for number in range(count - 1)] + ["1.0000001"],
        "capacity": [5] * 7 + [-1, "1.2345"] + [None] * (count - 9),
    }
    text = json.dumps({**document("columns"), "lanes": lanes}).encode()

    exact, fast = both(text)

    assert fast == exact
    assert {fault.pointer for fault in exact[0]} == {  # type: ignore[index] # the list of faults
        "/lanes/destination/399",
        "/lanes/unit_cost/399",
        "/lanes/capacity/7",
        "/lanes/capacity/8",
    }


@pytest.mark.parametrize("form", FORMS)
def test_a_quote_too_many_or_too_few_is_seen_anywhere(form: str) -> None:
    """Each quote of the lanes taken away or doubled, in turn: the exact reader's outcome."""
    text = json.dumps(document(form), separators=(",", ":")).encode()
    lanes = text.index(b'"lanes":') + len(b'"lanes":')
    places = [place for place in range(lanes, len(text)) if text[place : place + 1] == b'"']

    for place in places:
        for patch in (b"", b'""'):
            exact, fast = both(text[:place] + patch + text[place + 1 :])

            assert fast == exact, (place, patch)
