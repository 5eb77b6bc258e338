"""Both verifiers, written separately, say the same of good and of spoilt evidence."""

import random
from collections import Counter
from collections.abc import Callable
from collections.abc import Set as AbstractSet
from pathlib import Path

import pytest

from service.proof import standalone
from service.proof.evidence import verify_evidence
from service.proof.violations import CODES
from tests.evidence.mutations import MUTATIONS
from tests.evidence.zips import dated_zip, entries_of, good_zip, sharing_zip

# Random networks with and without a plan; drawn afresh, they would hide what broke.
SEEDS = 36
MUTANTS = 1_000
DATED_MUTANTS = 400
SHARING_MUTANTS = 400
MUTANTS_LONG = 10_000

# What random changes do not reach; tests/unit/proof has a case for each.
RARE = {
    "cut_wrong",
    "multiplier_wrong",
    "digest_mismatch",
    "event_chain",
    "plan_head",
    "shortage_wrong",
}


def both_verdicts(data: bytes, folder: Path) -> tuple[str, AbstractSet[str]]:
    """Return the verdict and the codes that both verifiers give; fail if they differ."""
    path = folder / "evidence.zip"
    path.write_bytes(data)
    ours = verify_evidence(path)
    theirs, problems = standalone.verify(data)
    codes = {problem.code for problem in ours.problems}
    assert (ours.verdict, codes) == (theirs, {code for code, _, _ in problems}), (ours, problems)
    return ours.verdict, codes


@pytest.mark.parametrize("seed", range(SEEDS))
def test_real_evidence_is_intact_for_both(seed: int, tmp_path: Path) -> None:
    """What the pipeline makes passes; else the comparison of spoilt files would mean little."""
    verdict, codes = both_verdicts(good_zip(seed), tmp_path)

    assert (verdict, codes) == ("intact", set())


def _compare(
    count: int,
    *,
    first: int,
    folder: Path,
    evidence: Callable[[int], bytes] = good_zip,
) -> tuple[Counter[str], Counter[str]]:
    """Spoil evidence ``count`` times and return how often each verdict and each code came."""
    verdicts: Counter[str] = Counter()
    found: Counter[str] = Counter()
    for number in range(first, first + count):
        rng = random.Random(number)  # noqa: S311 - a test that repeats, no secret
        mutation = MUTATIONS[number % len(MUTATIONS)]
        verdict, codes = both_verdicts(mutation(entries_of(evidence(number % SEEDS)), rng), folder)
        verdicts[verdict] += 1
        found.update(codes)
    return verdicts, found


def test_both_agree_on_a_thousand_spoilt_files(tmp_path: Path) -> None:
    """Verdict and codes are the same; the changes are strong enough to reach nearly every code."""
    verdicts, found = _compare(MUTANTS, first=0, folder=tmp_path)

    assert sum(verdicts.values()) == MUTANTS
    # Some changes are harmless, such as another valid price; most must not be.
    assert verdicts["broken"] > MUTANTS // 2
    assert verdicts["unreadable"] > MUTANTS // 20
    assert set(CODES) - set(found) <= RARE


def test_both_agree_on_spoilt_files_of_plans_on_days(tmp_path: Path) -> None:
    """Dates that are moved, days left out, lateness that is not that of the flow."""
    verdicts, _ = _compare(DATED_MUTANTS, first=0, folder=tmp_path, evidence=dated_zip)

    assert verdicts["broken"] > DATED_MUTANTS // 2


def test_both_agree_on_spoilt_files_of_plans_with_shared_limits(tmp_path: Path) -> None:
    """Multipliers, node prices and steps that are not those of the plan."""
    verdicts, _ = _compare(SHARING_MUTANTS, first=0, folder=tmp_path, evidence=sharing_zip)

    assert verdicts["broken"] > SHARING_MUTANTS // 2


@pytest.mark.long
def test_both_agree_on_ten_thousand_other_spoilt_files(tmp_path: Path) -> None:
    """The same, for longer than a build should take."""
    verdicts, found = _compare(MUTANTS_LONG, first=MUTANTS, folder=tmp_path)

    assert sum(verdicts.values()) == MUTANTS_LONG
    # A price of a shared limit is in none of these plans.
    assert set(CODES) - set(found) <= {"cut_wrong", "multiplier_wrong"}
