"""How far a run is, told by its child and read from its row."""

import threading

from service.engine.process import Child
from service.runs.run import RunState
from tests.engine.houses import House, fault
from tests.engine.processes import COMMAND, GIBIBYTE


def test_run_tells_how_far_it_is_while_it_is_planned(house: House) -> None:
    """Whoever waits sees that something moves; a run that starts again tells nothing of before."""
    waiting = house.submit(fault(do="sleep", seconds=60))
    told = house.await_run(waiting, lambda now: now.progress.phase == "read").progress
    token = next(iter(house.planner.tokens()))
    with house.store.transaction() as transaction:
        held = transaction.held(expired_only=False, limit=10)
        (claim,) = [claim for claim in held if claim.token == token]
        transaction.give_back(claim, crashed=False)
        again = transaction.run(waiting.id, waiting.tenant).progress

    assert waiting.progress.phase == again.phase == "checked"
    assert waiting.progress.counts["lanes"] == 8
    assert told.counts == {"lanes": 8}
    assert 0 <= told.seconds < 20


def test_planned_run_tells_that_it_is_stored_and_what_was_met(house: House) -> None:
    """Told with the ending, so that it is there also for a run that took no time."""
    run = house.finished(house.submit())

    assert run.progress.phase == "stored"
    assert run.progress.counts == {"lanes": 8}


def test_failed_run_tells_how_far_it_came(house: House) -> None:
    """Where a run ended says more than that it did."""
    run = house.finished(house.submit(fault(do="sleep", seconds=60), seconds=3))

    assert (run.state, run.progress.phase) == (RunState.FAILED, "read")


def test_repeated_phase_is_told_now_and_then_and_its_end_always() -> None:
    """A thousand rounds must not fill the log; the last of them is known all the same."""
    child = Child(COMMAND, "test")
    heard: list[object] = []

    child.ask(
        {"do": "rounds", "count": 1000},
        seconds=20,
        memory_bytes=GIBIBYTE,
        released=threading.Event(),
        on_progress=lambda phase, numbers: heard.append((phase, numbers)),
    )
    child.end()

    at = heard.index(("solved", {}))
    assert heard[:2] == [("read", {"lanes": 8}), ("round", {"round": 1})]
    assert heard[at - 1] == heard[-1] == ("round", {"round": 1000})
    assert len(heard) < 200
