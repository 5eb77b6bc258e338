"""Names of runs and claims."""

from datetime import UTC, datetime, timedelta

from service.runs.identity import new_run_id, new_token

MOMENT = datetime(2026, 2, 3, 15, 0, tzinfo=UTC)


def test_run_ids_sort_by_time_as_text() -> None:
    """The queue and the lists order by id alone."""
    ids = [new_run_id(MOMENT + timedelta(milliseconds=n * 977)) for n in range(200)]

    assert ids == sorted(ids)


def test_run_ids_of_one_moment_differ() -> None:
    """80 random bits: nobody guesses a neighbour's run."""
    ids = {new_run_id(MOMENT) for _ in range(1000)}

    assert len(ids) == 1000
    assert {run_id[:14] for run_id in ids} == {new_run_id(MOMENT)[:14]}


def test_time_of_a_run_id_is_its_moment() -> None:
    """By hand: 48 bits of milliseconds lead, in the extended hex alphabet of RFC 4648."""
    run_id = new_run_id(MOMENT)

    bits = int(run_id[4:], 32)

    assert len(run_id) == len("run_") + 26
    assert bits >> 80 == int(MOMENT.timestamp() * 1000)


def test_tokens_differ() -> None:
    """A token that two holders share fences nobody."""
    assert len({new_token() for _ in range(1000)}) == 1000
