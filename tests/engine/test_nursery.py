"""The nursery: children are warm before they are needed, used again, and gone when worn."""

import os
import signal
import time
from collections.abc import Iterator

import pytest

from service.engine import process
from service.engine.children import Nursery
from service.runs.faults import ChildReleased
from tests.engine.processes import COMMAND, ask, await_end, running


@pytest.fixture
def nursery() -> Iterator[Nursery]:
    """Open a nursery of children that misbehave on request."""
    opened = Nursery("test", command=COMMAND)
    yield opened
    opened.close()


def test_nursery_lends_the_same_warm_child_again(nursery: Nursery) -> None:
    """Starting Python for every run would cost a hundred times the planning of a small one."""
    first = nursery.take()
    ask(first, "echo", text="")
    nursery.give_back(first, input_bytes=10)

    second = nursery.take()

    assert second.pid == first.pid
    second.end()


def test_nursery_keeps_a_spare_beside_the_one_lent(nursery: Nursery) -> None:
    """After a crash the next run finds a child at once."""
    lent = nursery.take()
    until = time.monotonic() + 5
    while not nursery.pids() and time.monotonic() < until:
        time.sleep(0.02)

    assert len(nursery.pids()) == 1
    assert lent.pid not in nursery.pids()
    lent.end()


def test_nursery_retires_a_child_after_a_large_input(nursery: Nursery) -> None:
    """Memory that an allocator does not give back must not grow over the runs."""
    child = nursery.take()
    ask(child, "echo", text="")

    nursery.give_back(child, input_bytes=process.INPUT_BYTES_FOR_REUSE_MAX + 1)

    assert not running(child.pid)
    assert child.pid not in nursery.pids()


def test_nursery_retires_a_child_after_a_hundred_tasks(nursery: Nursery) -> None:
    """Fragments add up, so nobody stays for ever."""
    child = nursery.take()
    for _ in range(process.TASKS_MAX - 1):
        ask(child, "echo", text="")
    nursery.give_back(child, input_bytes=10)
    again = nursery.take()
    assert again.pid == child.pid
    ask(again, "echo", text="")

    nursery.give_back(again, input_bytes=10)

    assert not running(again.pid)


def test_nursery_does_not_lend_a_child_that_died_while_idle(nursery: Nursery) -> None:
    """The next run must not pay for a death that it did not cause."""
    child = nursery.take()
    ask(child, "echo", text="")
    nursery.give_back(child, input_bytes=10)
    os.kill(child.pid, signal.SIGKILL)
    assert await_end(child.pid)

    replacement = nursery.take()

    assert ask(replacement, "echo", text="alive")["text"] == "alive"
    replacement.end()


def test_closed_nursery_lends_nothing_and_leaves_nobody() -> None:
    """A service that stops is gone with all its children."""
    nursery = Nursery("test", command=COMMAND)
    child = nursery.take()
    ask(child, "echo", text="")
    nursery.give_back(child, input_bytes=10)

    nursery.close()

    assert await_end(child.pid)
    with pytest.raises(ChildReleased):
        nursery.take()
