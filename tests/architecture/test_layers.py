"""Who may import whom: what pyproject.toml says is what is so, and what loading really loads."""

import ast
import subprocess
import sys
import tomllib
from collections.abc import Iterable
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
DATABASE = {"sqlalchemy", "alembic", "psycopg", "sqlite3"}


def test_every_import_contract_is_kept() -> None:
    """A layer that may be skipped once is no layer; there is no list of exceptions."""
    program = Path(sys.executable).with_name("lint-imports")

    result = subprocess.run(
        [program, "--no-cache"], cwd=ROOT, capture_output=True, text=True, check=False
    )

    assert result.returncode == 0, result.stdout + result.stderr


def test_no_import_contract_has_an_exception() -> None:
    """An ignored import would keep the check green and the layer broken."""
    configuration = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))

    contracts = configuration["tool"]["importlinter"]["contracts"]
    assert [c["id"] for c in contracts if "ignore_imports" in c or "exhaustive_ignores" in c] == []
    assert contracts[0]["exhaustive"] is True


def loaded_by(code: str) -> set[str]:
    """Return the top-level packages that a fresh Python has loaded after running ``code``."""
    script = (
        f"{code}\nimport sys\nprint(*sorted({{name.partition('.')[0] for name in sys.modules}}))"
    )
    result = subprocess.run(
        [sys.executable, "-c", script], cwd=ROOT, capture_output=True, text=True, check=False
    )
    assert result.returncode == 0, result.stderr
    return set(result.stdout.splitlines()[-1].split())


@pytest.mark.parametrize("kind", ["intake", "plan"])
def test_a_child_process_loads_no_database_and_no_web(kind: str) -> None:
    """A solver that goes wild must have no way to the facts, and its start must be quick."""
    loaded = loaded_by(f"from service.engine.child import KINDS\nKINDS[{kind!r}]()")

    assert loaded & (DATABASE | {"fastapi", "starlette", "typer", "rich", "uvicorn"}) == set()


def test_the_intake_child_loads_no_solver() -> None:
    """A check must not wait for a solver's libraries."""
    loaded = loaded_by("from service.engine.child import KINDS\nKINDS['intake']()")

    assert loaded & {"ortools", "scipy"} == set()


FILE_PACKAGES = {"pyarrow", "python_calamine", "xlsxwriter"}
# Where files are read and written; everywhere else these packages are not even named.
FILE_MODULES = ("service/network/files/", "service/doors/plan_", "service/doors/template_")


def test_packages_for_files_are_loaded_where_a_file_is_read_or_written() -> None:
    """They take 50 MB (measured), which no server and no child without such a file shall hold.

    A name for a type is no loading: it stands under TYPE_CHECKING.
    """
    elsewhere, at_once = [], []
    for path in sorted((ROOT / "service").rglob("*.py")):
        name = path.relative_to(ROOT).as_posix()
        tree = ast.parse(path.read_text(encoding="utf-8"))
        if FILE_PACKAGES & imported_by(ast.walk(tree)) and not name.startswith(FILE_MODULES):
            elsewhere.append(name)
        if FILE_PACKAGES & imported_by(tree.body):
            at_once.append(name)

    assert (elsewhere, at_once) == ([], [])


def imported_by(nodes: Iterable[ast.AST]) -> set[str]:
    """Return the top-level packages that some statements import."""
    names: set[str] = set()
    for node in nodes:
        if isinstance(node, ast.Import):
            names |= {alias.name.partition(".")[0] for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module:
            names.add(node.module.partition(".")[0])
    return names


def test_the_web_server_and_the_intake_load_no_package_for_files() -> None:
    """The server never does, its children only for a body of that form."""
    for code in (
        "import service.doors.http.app, service.main",
        "from service.engine.child import KINDS\nKINDS['intake']()",
    ):
        assert loaded_by(code) & FILE_PACKAGES == set()


def test_the_proof_loads_with_numpy_alone() -> None:
    """An auditor needs Python and NumPy, not our solver nor our web server.

    Every other package is blocked, so that an import that is hidden in a function's first call
    would fail as well as one at the top.
    """
    code = """
import sys
class Block:
    def find_spec(self, name, path=None, target=None):
        top = name.partition('.')[0]
        if top not in sys.stdlib_module_names | {'numpy', 'service'}:
            raise ImportError(f'{name} is blocked')
sys.meta_path.insert(0, Block())
import pkgutil, importlib, service.proof
for module in pkgutil.iter_modules(service.proof.__path__, 'service.proof.'):
    importlib.import_module(module.name)
"""
    loaded = loaded_by(code)

    assert "numpy" in loaded


def test_the_standalone_verifier_loads_with_python_alone() -> None:
    """It lies in every evidence zip and must run wherever that is opened."""
    source = ROOT / "service" / "proof" / "standalone.py"
    code = f"""
import sys, runpy
class Block:
    def find_spec(self, name, path=None, target=None):
        if name.partition('.')[0] not in sys.stdlib_module_names:
            raise ImportError(f'{{name}} is blocked')
sys.meta_path.insert(0, Block())
runpy.run_path({str(source)!r}, run_name='verify')
"""
    loaded = loaded_by(code)

    assert loaded & {"numpy", "service"} == set()
