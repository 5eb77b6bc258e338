"""The wheel holds what the service needs where there is no checkout."""

import subprocess
import sys
import zipfile
from pathlib import Path

ROOT = Path(__file__).parents[2]


def test_the_wheel_brings_the_migrations_and_the_pages(tmp_path: Path) -> None:
    """An installed service must be able to make its own database and its own documentation."""
    command = [sys.executable, "-m", "hatchling", "build", "-t", "wheel", "-d", str(tmp_path)]
    subprocess.run(command, cwd=ROOT, check=True, capture_output=True)
    (wheel,) = tmp_path.glob("*.whl")
    with zipfile.ZipFile(wheel) as archive:
        packed = set(archive.namelist())

    wanted = {
        f"service/store/{path.relative_to(ROOT).as_posix()}"
        for path in (ROOT / "migrations").rglob("*.py")
    } | {
        path.relative_to(ROOT).as_posix()
        for path in (ROOT / "service").rglob("*")
        if path.is_file() and "__pycache__" not in path.parts
    }
    wanted |= {
        f"service/doors/http/examples/{path.name}"
        for path in (ROOT / "openapi" / "examples").iterdir()
    }
    assert "service/store/migrations/env.py" in wanted
    assert "service/doors/http/examples/plan.json" in wanted
    assert wanted - packed == set()
    assert {name for name in packed if name.startswith("tests")} == set()
