"""What is written and read back is what it was: networks, options, reports, documents."""

import tempfile
from datetime import date
from fractions import Fraction
from pathlib import Path
from random import Random

import orjson
from hypothesis import given
from hypothesis import strategies as st

from service.network.canonical import network_digest, network_entries, network_from_entries
from service.network.intake import IntakeReport
from service.network.options import Options, read_options
from service.network.quantities import exact_text, parse_exact
from tests.factories import plan_network, take_in
from tests.random_networks import RandomNetwork
from tests.strategies import networks, randoms


@given(network=networks())
def test_a_network_comes_back_from_its_bytes(network: RandomNetwork) -> None:
    """The normal form is complete: reading it gives the bytes and the digest it was read from."""
    planned = plan_network(network.document, **network.options)

    entries = network_entries(planned.network)
    again = network_from_entries(entries)

    assert network_entries(again) == entries
    assert network_digest(again) == planned.network_digest


@given(value=st.fractions())
def test_an_amount_comes_back_from_its_text(value: Fraction) -> None:
    """Amounts leave as text, also those that no decimal can say."""
    assert parse_exact(exact_text(value)) == value


options = st.builds(
    Options,
    shortages=st.sampled_from(["allow", "forbid"]),
    worth_at_most=st.none() | st.integers(0, 10**9).map(lambda n: Fraction(n, 10**6)),
    demand_rounding=st.sampled_from(["refuse", "up", "down"]),
    bad_rows=st.sampled_from(["refuse", "set_aside"]),
    label=st.none() | st.text("abc äöü/", min_size=1, max_size=20),
    plan_for=st.none() | st.dates(date(2000, 1, 1), date(2100, 1, 1)),
    deadline_seconds=st.integers(1, 900),
    maximum_age_minutes=st.none() | st.integers(0, 10**6),
)


@given(chosen=options)
def test_options_come_back_from_their_document(chosen: Options) -> None:
    """What is stored beside a run is every effective option, and nothing else."""
    document = orjson.loads(orjson.dumps(chosen.to_document()))

    assert Options.from_document(document) == chosen


@given(network=networks(), rng=randoms())
def test_a_report_comes_back_from_the_pipe(network: RandomNetwork, rng: Random) -> None:
    """Faults and summary survive the way from the intake child, for good and for bad networks."""
    document = network.document
    if rng.random() < 0.5:
        document["demand"].append({"site": "nowhere", "item": "nothing", "quantity": "-1"})
    effective, _ = read_options(network.options)
    assert effective is not None
    with tempfile.TemporaryDirectory() as folder:
        report = take_in(orjson.dumps(document), Path(folder), effective)

    again = IntakeReport.from_document(orjson.loads(orjson.dumps(report.to_document())))

    assert again == report
