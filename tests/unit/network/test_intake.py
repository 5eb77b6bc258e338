"""The whole check: what it writes, what it answers, and that nothing makes it fall over."""

import copy
import gzip
import hashlib
import json
import random
import tempfile
from pathlib import Path
from typing import Any

import jsonschema_rs
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.network.canonical import network_digest, network_entries, normal_form, read_network
from service.network.faults import Status
from service.network.intake import IntakeReport, Limits, intake
from service.network.options import Options
from service.network.schema import network_schema
from tests.network_samples import check, found, sound

NAMES = sorted(
    {name for table in ("items", "sites", "supply", "demand", "lanes") for row in sound()[table]
     for name in row}
    | {"rules", "control", "origins", "destinations", "due", "shortage_cost", "ids", "tag", "", "x"}
)  # fmt: skip
VALUES: list[Any] = [
    *(None, True, False, 0, 1, -1, 1.5, -0.5, 10**18, 2**62 - 1, 2**62, 10**30),
    *("", "0", "1", "1.5", "1e5", "-1", "0.1234", "bag", "l", "m3", "kg", "pallet", "unit"),
    *("weight_kg", "volume_m3", "item", "together", "each", "DEP-NORTH", "X", "Y", "YARD-07"),
    *("ROAD-25", "BRINE", "L1", "X>YARD-07", "X>YARD-07#2", "closure", "throughput", "sent"),
    *("2026-02-03", "2026-02-03T15:00:00Z", "\u0000", "a\nb", "\u00e9" * 64, "x" * 65),
    *([], {}, ["X"], ["Y"], ["warehouse"], ["cross_dock", "ship_to", "warehouse"], [[]]),
    *([["0.1", None]], {"a": "b"}, {"quantity": "5"}, {"ids": ["X"]}, {"origin": ["X"]}),
]


SCHEMA = jsonschema_rs.validator_for(network_schema())


def places(value: object, path: tuple[Any, ...] = ()) -> list[tuple[Any, ...]]:
    """Return every place below ``value``."""
    members: list[tuple[Any, Any]] = []
    if isinstance(value, dict):
        members = list(value.items())
    elif isinstance(value, list):
        members = list(enumerate(value))
    below = [place for name, part in members for place in places(part, (*path, name))]
    return [(*path, name) for name, _ in members] + below


def mutate(document: Any, source: random.Random) -> None:  # noqa: ANN401 - JSON
    """Change one place of a document at random."""
    everywhere = places(document)
    place = source.choice(everywhere)
    parent = document
    for token in place[:-1]:
        parent = parent[token]
    kind = source.randrange(6)
    if kind == 0:
        del parent[place[-1]]
    elif kind == 1 and isinstance(parent, dict):
        parent[source.choice(NAMES)] = copy.deepcopy(source.choice(VALUES))
    elif kind == 2 and isinstance(parent, list):
        parent.append(copy.deepcopy(parent[place[-1]]))
    elif kind == 3:
        other = document
        for token in source.choice(everywhere):
            other = other[token]
        parent[place[-1]] = copy.deepcopy(other)
    else:
        parent[place[-1]] = copy.deepcopy(source.choice(VALUES))


def in_form(document: dict[str, Any], form: str) -> dict[str, Any]:
    """Return the sound document with its lanes in another form."""
    if form == "columns":
        for name in ("supply", "demand", "lanes"):
            rows = document[name]
            names = sorted({field for row in rows for field in row})
            document[name] = {field: [row.get(field) for row in rows] for field in names}
    elif form == "table":
        document["lanes"] = {
            "origins": ["DEP-NORTH", "X"],
            "destinations": ["YARD-07", "X"],
            "unit_cost": [["1", None], [2.5, None]],
            "capacity": [[1, None], [3, 4]],
            "item": "ROAD-25",
            "tags": ["a"],
        }
        document["control"].pop("lane_rows")
    elif form == "tables":
        document["lanes"] = [
            {"origins": ["X"], "destinations": ["YARD-07"], "unit_cost": [["1"]]},
            {"origins": ["Y"], "destinations": ["X"], "unit_cost": [[3]], "per": "item"},
        ]
        document["control"].pop("lane_rows")
    return document


@given(
    st.randoms(use_true_random=False),
    st.sampled_from(["rows", "columns", "table", "tables"]),
    st.integers(0, 5),
    st.sampled_from(
        [
            Options(),
            Options(bad_rows="set_aside", maximum_age_minutes=5),
            Options(demand_rounding="down"),
        ]
    ),
)
def test_every_mutation_of_a_network_is_accepted_or_has_faults(
    source: random.Random, form: str, mutations: int, options: Options
) -> None:
    """Nothing that a client sends may crash the check.

    What is accepted is valid by the published schema, and written in normal form.
    """
    document = in_form(sound(), form)
    for _ in range(mutations):
        if places(document):
            mutate(document, source)

    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        report = check(document, folder, options)

        assert report.status in (Status.ACCEPTED, Status.INVALID)
        if report.status == Status.ACCEPTED and options.bad_rows == "refuse":
            assert SCHEMA.is_valid(document)
        assert (report.status == Status.ACCEPTED) == (report.fault_count == 0)
        assert len(report.faults) == min(report.fault_count, 100)
        assert IntakeReport.from_document(json.loads(json.dumps(report.to_document()))) == report
        if report.summary is not None:
            network = read_network(folder / "network.zip")
            assert network_entries(normal_form(network)) == network_entries(network)
            assert network_digest(network) == report.summary["network_digest"]
        elif report.summary is None:
            assert not (folder / "network.zip").exists()


@given(st.binary(max_size=40), st.integers(0, 1 << 16), st.sampled_from([None, "gzip", "zstd"]))
def test_no_bytes_make_the_check_fall_over(data: bytes, place: int, encoding: str | None) -> None:
    """Bytes written over a sound body anywhere are a body like any other."""
    body = json.dumps(sound()).encode()
    if encoding == "gzip":
        body = gzip.compress(body)
    place %= len(body)
    broken = body[:place] + data + body[place + len(data) :]

    with tempfile.TemporaryDirectory() as name:
        report = check(broken, Path(name), content_encoding=encoding or "identity")

    assert (report.status == Status.ACCEPTED) == (report.fault_count == 0)


def test_an_accepted_network_is_written_for_planning(tmp_path: Path) -> None:
    """The bytes as received, the normal form, and a summary that a run can be stored with."""
    body = json.dumps(sound(), indent=1).encode()

    report = check(gzip.compress(body), tmp_path, content_encoding="gzip")

    assert report.status == Status.ACCEPTED
    assert (tmp_path / "received").read_bytes() == body
    assert json.loads((tmp_path / "intake.json").read_bytes()) == report.summary
    network = read_network(tmp_path / "network.zip")
    summary = report.summary
    assert summary is not None
    assert summary["request_digest"] == f"sha-256:{hashlib.sha256(body).hexdigest()}"
    assert summary["network_digest"] == network_digest(network)
    assert (summary["currency"], summary["name"]) == ("EUR", "Evening cut-off")
    assert summary["cut_off"] == "2026-02-03T16:00:00+01:00"


def test_the_plan_is_for_the_local_date_of_the_cut_off(tmp_path: Path) -> None:
    """Unless an option says otherwise; in UTC this cut-off is a day later."""
    document = sound() | {"cut_off": "2026-02-03T23:30:00-05:00"}

    local = check(document, tmp_path / "local").summary
    said = check(document, tmp_path / "said", Options.from_document(
        Options().to_document() | {"plan_for": "2026-02-10"}
    )).summary  # fmt: skip

    assert local is not None
    assert said is not None
    assert (local["plan_for"], said["plan_for"]) == ("2026-02-03", "2026-02-10")


@pytest.mark.parametrize(
    ("media_type", "accepted"),
    [
        ("application/json", True),
        ("Application/JSON; charset=UTF-8", True),
        ("application/json; charset=utf-16", False),
        ("text/plain", False),
        ("application/json-patch+json", False),
        ("", False),
    ],
)
def test_other_media_types_are_refused(media_type: str, *, accepted: bool, tmp_path: Path) -> None:
    """Guessing a format from its bytes invites two readings of one body."""
    report = check(sound(), tmp_path, media_type=media_type)

    assert report.status == (Status.ACCEPTED if accepted else Status.UNSUPPORTED)


@pytest.mark.parametrize(
    ("body", "limits", "status", "code"),
    [
        (b"{", Limits(), Status.UNREADABLE, "not_json"),
        (b"[" * 17 + b"]" * 17, Limits(), Status.UNREADABLE, "nested_too_deeply"),
        (b'{"a": {}}', Limits(nesting_max=1), Status.UNREADABLE, "nested_too_deeply"),
        (b" " * 11, Limits(unpacked_bytes_max=10), Status.TOO_LARGE, "body_too_large"),
        (b'{"a": 1, "a": 2}', Limits(), Status.INVALID, "duplicate_name"),
    ],
)
def test_a_body_that_cannot_be_read_has_the_right_status(
    body: bytes, limits: Limits, status: Status, code: str, tmp_path: Path
) -> None:
    """The doors turn the status into their own words."""
    (tmp_path / "spool").write_bytes(body)

    report = intake(
        tmp_path / "spool",
        tmp_path,
        options=Options(),
        media_type="application/json",
        content_encoding=None,
        limits=limits,
    )

    assert report.status == status
    assert [entry[1] for entry in found(report)] == [code]


@pytest.mark.parametrize("document", [{}, {"faults": [], "fault_count": "0"}])
def test_a_report_that_is_none_is_not_read(document: dict[str, object]) -> None:
    """What comes out of a pipe is checked before it is believed."""
    with pytest.raises((KeyError, TypeError)):
        IntakeReport.from_document({"summary": None, "status": "accepted"} | document)
