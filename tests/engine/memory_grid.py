"""Networks of many shapes, and what planning each of them takes in a child of its own.

``python -m tests.engine.memory_grid`` measures the grid, fits the weights of
``service/planning/memory.py`` so that no point lies above its estimate, and prints them.
"""

import sys
import tempfile
import threading
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import orjson
from scipy.optimize import linprog

from service.engine.children import CHILD_COMMAND
from service.engine.process import Child
from service.network.intake import Limits, intake
from service.network.options import Options
from service.network.workload import Workload
from service.planning.memory import WEIGHTS, features

KIBIBYTE = 1024


@dataclass(frozen=True, slots=True, kw_only=True)
class Shape:
    """A network: ``lanes_each`` are those that end in one ship-to, None for one from everywhere."""

    warehouses: int
    ship_tos: int
    items: int = 1
    lines_each: int = 1
    lanes_each: int | None = None
    hubs: int = 0
    lanes_of_one_item: bool = False
    capped: bool = False
    texts: int = 0
    scarce: bool = False

    def name(self) -> str:
        """Return the shape in a few words, for a table."""
        more = [
            f"{self.items} items" if self.items > 1 else "",
            f"{self.lines_each} lines each" if self.lines_each > 1 else "",
            f"{self.lanes_each} lanes each" if self.lanes_each else "",
            f"{self.hubs} hubs" if self.hubs else "",
            "lanes of one item" if self.lanes_of_one_item else "",
            "capped" if self.capped else "",
            f"texts of {self.texts}" if self.texts else "",
            "scarce" if self.scarce else "",
        ]
        return ", ".join([f"{self.warehouses} x {self.ship_tos}", *filter(None, more)])


SMALL: Sequence[Shape] = (
    Shape(warehouses=2, ship_tos=3),
    Shape(warehouses=20, ship_tos=1000),
    Shape(warehouses=60, ship_tos=1000),
    Shape(warehouses=20, ship_tos=400, items=5),
    Shape(warehouses=5, ship_tos=60, items=200, hubs=2),
    Shape(warehouses=20, ship_tos=1000, hubs=20, capped=True, scarce=True),
    Shape(warehouses=5, ship_tos=100, lines_each=100, texts=100),
    Shape(warehouses=40, ship_tos=2000, lanes_each=4, texts=60),
    Shape(warehouses=10, ship_tos=200, items=20, lanes_of_one_item=True),
)
LARGE: Sequence[Shape] = (
    *SMALL,
    Shape(warehouses=100, ship_tos=2000),
    Shape(warehouses=200, ship_tos=5000),
    Shape(warehouses=200, ship_tos=5000, capped=True, scarce=True),
    Shape(warehouses=50, ship_tos=1000, items=10),
    Shape(warehouses=50, ship_tos=1000, items=10, lanes_of_one_item=True),
    Shape(warehouses=50, ship_tos=2000, hubs=50, scarce=True),
    Shape(warehouses=1000, ship_tos=20000, lanes_each=5),
    Shape(warehouses=100, ship_tos=20000, lanes_each=10, texts=40),
    Shape(warehouses=20, ship_tos=500, lines_each=100, texts=50),
    Shape(warehouses=3, ship_tos=100, items=1000),
)


def document(shape: Shape) -> dict[str, Any]:
    """Return a network of ``shape``, always the same one."""
    rng = np.random.default_rng(20260203)
    origins = [f"W-{n:05d}" for n in range(shape.warehouses)]
    hubs = [f"H-{n:05d}" for n in range(shape.hubs)]
    ends = [f"S-{n:06d}" for n in range(shape.ship_tos)]
    items = [f"ITEM-{n:04d}" for n in range(shape.items)]
    roles = [*(("warehouse", name) for name in origins), *(("cross_dock", name) for name in hubs)]
    roles += [("ship_to", name) for name in ends]
    wanted = rng.integers(1, 50, (shape.items, shape.ship_tos, shape.lines_each))
    part = 0.8 if shape.scarce else 1.3
    stock = (wanted.sum(axis=(1, 2)) * part / shape.warehouses).astype(int) + 1
    return {
        "format": 1,
        "currency": "EUR",
        "cut_off": "2026-02-03T16:00:00+01:00",
        "items": [{"id": item, "unit": "bag"} for item in items],
        "sites": [{"id": name, "roles": [role]} for role, name in roles],
        "supply": {
            "site": origins * shape.items,
            "item": [item for item in items for _ in origins],
            "quantity": [int(n) for n in np.repeat(stock, shape.warehouses)],
        },
        "demand": _demand(shape, items, ends, wanted),
        "lanes": _lanes(shape, rng, origins, hubs, ends, items),
    }


def _demand(shape: Shape, items: list[str], ends: list[str], wanted: Any) -> dict[str, Any]:  # noqa: ANN401 - NumPy's array of any width
    lines = wanted.size
    rows: dict[str, Any] = {
        "reference": [f"SO-{n:08d}" for n in range(lines)],
        "item": [item for item in items for _ in range(shape.ship_tos * shape.lines_each)],
        "site": [end for _ in items for end in ends for _ in range(shape.lines_each)],
        "quantity": wanted.ravel().tolist(),
        "priority": [n % 9 + 1 for n in range(lines)],
    }
    if shape.texts:
        rows["extra"] = [{"note": f"{n:08d}" * (shape.texts // 8)} for n in range(lines)]
    return rows


def _lanes(  # noqa: PLR0913, PLR0917 - the parts of a network
    shape: Shape,
    rng: np.random.Generator,
    origins: list[str],
    hubs: list[str],
    ends: list[str],
    items: list[str],
) -> Any:  # noqa: ANN401 - one of the forms of lanes
    if shape.lanes_each is not None:
        return _few_lanes(shape, rng, origins, ends)
    blocks = [(origins, ends)]
    blocks += [(origins, hubs), (hubs, ends)] if hubs else []
    tables = []
    for item in items if shape.lanes_of_one_item else [None]:
        for tails, heads in blocks:
            size = (len(tails), len(heads))
            table = {
                "origins": tails,
                "destinations": heads,
                "unit_cost": rng.integers(100, 10_000, size).tolist(),
            }
            if shape.capped:
                table["capacity"] = rng.integers(5, 100, size).tolist()
            tables.append(table if item is None else {**table, "item": item})
    return tables


def _few_lanes(
    shape: Shape, rng: np.random.Generator, origins: list[str], ends: list[str]
) -> dict[str, Any]:
    each = shape.lanes_each or 0
    chosen = np.argsort(rng.random((shape.ship_tos, shape.warehouses)), axis=1)[:, :each]
    count = chosen.size
    lanes: dict[str, Any] = {
        "origin": [origins[n] for n in chosen.ravel()],
        "destination": [end for end in ends for _ in range(each)],
        "unit_cost": rng.integers(100, 10_000, count).tolist(),
    }
    if shape.texts:
        lanes["id"] = [f"LANE-{n:08d}" for n in range(count)]
        lanes["extra"] = [{"note": f"{n:08d}" * (shape.texts // 8)} for n in range(count)]
    return lanes


@dataclass(frozen=True, slots=True, kw_only=True)
class Measured:
    """A shape, its counts, and the address space that planning it came to at most."""

    shape: Shape
    workload: Workload
    peak_bytes: int


def measured(shape: Shape) -> Measured:
    """Check and plan a network of ``shape``, the latter in a fresh child without a bound."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        (folder / "spool").write_bytes(orjson.dumps(document(shape)))
        options = Options(deadline_seconds=900)
        report = intake(
            folder / "spool",
            folder,
            options=options,
            media_type="application/json",
            content_encoding=None,
            limits=Limits(),
        )
        assert report.summary is not None, report.faults[:3]
        child = Child(CHILD_COMMAND, "plan")
        try:
            answer = child.ask(
                {"source": name, "target": name, "options": options.to_document()},
                seconds=900,
                memory_bytes=2**40,
                released=threading.Event(),
            )
            assert answer["state"] == "planned", answer
            peak = status(child.pid)["VmPeak"]
        finally:
            child.end()
    workload: Any = report.summary["workload"]
    return Measured(shape=shape, workload=Workload(**workload), peak_bytes=peak)


def status(pid: int) -> Mapping[str, int]:
    """Return what the kernel says about the memory of a process, in bytes."""
    lines = Path(f"/proc/{pid}/status").read_text(encoding="ascii").splitlines()
    fields = (line.split() for line in lines if line.endswith(" kB"))
    return {words[0].removesuffix(":"): int(words[1]) * KIBIBYTE for words in fields}


def fitted(points: Sequence[Measured]) -> list[float]:
    """Return the weights, none negative, that lie above all points and least above their sum.

    Each point counts by how far its estimate is above it in proportion.
    """
    rows = np.array([features(point.workload.to_document()) for point in points], np.float64)
    peaks = np.array([point.peak_bytes for point in points], np.float64)
    scaled = rows / peaks[:, None]
    found: Any = linprog(scaled.sum(axis=0), A_ub=-scaled, b_ub=-np.ones(len(points)))
    return [float(weight) for weight in found.x]


def main() -> None:
    """Measure, fit, print."""
    points = []
    for shape in SMALL if "--small" in sys.argv[1:] else LARGE:
        points.append(measured(shape))
        told = f"{points[-1].peak_bytes / 2**20:8.0f} MiB  {shape.name()}\n"
        sys.stderr.write(told)
    weights = fitted(points)
    for name, weight in zip(WEIGHTS, weights, strict=True):
        sys.stdout.write(f"{name}: {weight:.0f}\n")
    for point in points:
        estimate = np.dot(weights, features(point.workload.to_document()))
        ratio = estimate / point.peak_bytes
        sys.stdout.write(f"{ratio:5.2f}  {point.shape.name()}  {point.workload}\n")


if __name__ == "__main__":
    main()
