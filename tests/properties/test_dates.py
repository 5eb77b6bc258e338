"""Plans on days against an oracle that names every path, and both verifiers on dated networks."""

from pathlib import Path
from random import Random

import pytest

from service.proof import standalone
from service.proof.evidence import verify_evidence
from tests.dates_by_paths import achieved_on_days, best_of
from tests.evidence.zips import evidence_of
from tests.factories import NetworkRefused, plan_network
from tests.random_dates import small_network, with_dates
from tests.random_networks import draw_network

SEEDS = 60


@pytest.mark.parametrize("seed", range(SEEDS))
def test_a_plan_on_days_is_as_good_as_the_best_of_all_paths(seed: int) -> None:
    """The oracle knows paths from day to day and no nodes: what was split wrongly would differ."""
    document = small_network(Random(seed))  # noqa: S311 - a test that repeats, no secret

    planned = plan_network(document)

    own = achieved_on_days(planned.certificate["steps"], planned.plan["total_cost"])
    assert own == best_of(document)


@pytest.mark.parametrize("seed", range(SEEDS))
def test_both_verifiers_find_a_dated_plan_intact(seed: int, tmp_path: Path) -> None:
    """Rules, stock to keep, origins and limits together with dates; built three times apart."""
    rng = Random(seed)  # noqa: S311 - a test that repeats, no secret
    drawn = draw_network(rng)
    try:
        data = evidence_of(with_dates(drawn.document, rng), drawn.options)
    except NetworkRefused as refused:
        codes = [fault.code for fault in refused.report.faults]
    else:
        codes = []
        path = tmp_path / "evidence.zip"
        path.write_bytes(data)
        assert verify_evidence(path).verdict == "intact"
        assert standalone.verify(data) == ("intact", [])
    # What must move on lanes that can leave on several days waits for limits over days.
    assert set(codes) <= {"not_yet"}
