"""The estimate of planning's memory: never below what was measured, and refused in time."""

import dataclasses
from pathlib import Path

import pytest

from service.engine.children import Nursery
from service.engine.process import Child, address_space_bytes
from service.engine.tasks import PlanningChildren
from service.network.options import Options
from service.planning.memory import WEIGHTS, estimated_peak_bytes, limit_bytes
from service.runs.faults import ChildMemory
from service.runs.run import Claim, Needs
from tests.engine.houses import House, fault
from tests.engine.memory_grid import LARGE, SMALL, Shape, measured
from tests.engine.processes import COMMAND, ask
from tests.run_factories import intake_folder

MEBIBYTE = 2**20


def points(shapes: list[Shape], *marks: pytest.MarkDecorator) -> list[object]:
    """Return shapes as parameters with readable names."""
    return [pytest.param(shape, id=shape.name(), marks=marks) for shape in shapes]


@pytest.mark.parametrize(
    "shape",
    [
        *points(list(SMALL)),
        *points([shape for shape in LARGE if shape not in SMALL], pytest.mark.long),
    ],
)
def test_estimate_is_never_below_the_measured_peak(shape: Shape) -> None:
    """An estimate that was too low would let in what is then ended half-way."""
    point = measured(shape)

    estimated = estimated_peak_bytes(point.workload.to_document())

    assert point.peak_bytes <= estimated
    # Nor does it refuse what would fit easily: the bound of a bound is worth little.
    assert estimated <= 2.5 * point.peak_bytes


def test_limit_is_the_estimate_with_room_and_never_more_than_allowed() -> None:
    """By hand: half as much again; what a child holds beyond its base comes on top."""
    base = WEIGHTS["base"]
    estimated = 1000 * MEBIBYTE
    allowed = 2000 * MEBIBYTE

    assert limit_bytes(estimated, allowed=allowed, held=0) == 1500 * MEBIBYTE
    assert limit_bytes(estimated, allowed=allowed, held=base) == 1500 * MEBIBYTE
    assert limit_bytes(estimated, allowed=allowed, held=base + 9) == 1500 * MEBIBYTE + 9
    assert limit_bytes(estimated, allowed=1200 * MEBIBYTE, held=0) == 1200 * MEBIBYTE
    assert limit_bytes(None, allowed=allowed, held=0) == allowed


def test_what_a_child_maps_is_what_its_limit_counts() -> None:
    """Address space, not what is touched of it: more than a resident set ever says."""
    child = Child(COMMAND, "test")
    ask(child, "echo", text="salt")
    before = address_space_bytes(child.pid)

    ask(child, "map", mebibytes=200)

    assert address_space_bytes(child.pid) >= before + 200 * MEBIBYTE
    child.end()
    assert address_space_bytes(child.pid) == 0


def claim_of(house: House, *, memory_bytes: int) -> Claim:
    """Return a claim whose run is estimated at ``memory_bytes``."""
    run = house.submit()
    with house.store.transaction() as transaction:
        claim = transaction.claim(run.id, token="0" * 32, lease_seconds=30, crashes_max=3)  # type: ignore[arg-type] # any token
    assert claim is not None
    return dataclasses.replace(claim, needs=Needs(likeness=None, memory_bytes=memory_bytes))


@pytest.mark.parametrize(
    ("mebibytes", "fits"),
    [(300, True), (3000, False)],
    ids=["fits into what is allowed", "does not fit"],
)
def test_wrong_estimate_costs_a_second_try_and_no_run(
    tmp_path: Path, idle_house: House, mebibytes: int, *, fits: bool
) -> None:
    """The first child ends at its own limit, the next one has all that is allowed."""
    planner = PlanningChildren(Nursery("plan", command=COMMAND), memory_bytes=2000 * MEBIBYTE)
    claim = claim_of(idle_house, memory_bytes=100 * MEBIBYTE)
    source, target = intake_folder(tmp_path / "in"), tmp_path / "out"
    target.mkdir()
    options = Options(label=fault(do="map", mebibytes=mebibytes))

    try:
        if fits:
            assert planner.plan(claim, source, options, target).state == "planned"
        else:
            with pytest.raises(ChildMemory):
                planner.plan(claim, source, options, target)
    finally:
        planner.close()
