"""A plan in the forms that take long to write, made where it stops nobody.

A million plan lines are seconds of Python. Beyond a small table as CSV the work is done by a
process of its own, which knows nothing but paths and names, and is ended when it takes too long;
the libraries for workbooks and Parquet are loaded nowhere else.
"""

import subprocess
import sys
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any, Final

import orjson
import structlog
from anyio import fail_after, run_process
from anyio.to_thread import run_sync

import service
from service.doors.plan_tables import table_csv
from service.planning.outcome import PLAN_FILE
from service.runs.faults import ChildCrashed, ChildTimeout

# Up to here it takes a thread a few milliseconds, less than a process takes to start.
THREAD_BYTES_MAX: Final = 256 * 1024
SECONDS_MAX: Final = 120.0
# Where Python finds this package, and no secret of the service.
_ENVIRONMENT: Final = {"PYTHONPATH": str(Path(service.__path__[0]).parent), "PYTHONUTF8": "1"}

Plan = Mapping[str, Any]


async def write_table(plan: bytes, form: str, table: str, folder: Path) -> Path:
    """Write ``table`` of the plan document ``plan`` as ``csv`` or ``parquet``; return the file."""
    target = folder / f"{table}.{form}"
    if form == "csv" and len(plan) <= THREAD_BYTES_MAX:
        await run_sync(lambda: target.write_bytes(table_csv(orjson.loads(plan), table)))
        return target
    return await _written(plan, form, table, folder)


async def write_whole(plan: bytes, folder: Path) -> Path:
    """Write the plan document ``plan`` as a workbook into ``folder``; return the file."""
    return await _written(plan, "xlsx", "plan", folder)


async def write_template(folder: Path) -> Path:
    """Write the workbook to start from into ``folder``; return the file."""
    return await _written(b"{}", "template", "network", folder)


async def _written(plan: bytes, form: str, table: str, folder: Path) -> Path:
    """Have a process write a file."""
    source, target = folder / PLAN_FILE, folder / f"{table}.{form}"
    await run_sync(source.write_bytes, plan)
    command = [sys.executable, "-m", __name__, str(source), form, table, str(target)]
    try:
        with fail_after(SECONDS_MAX):
            ended = await run_process(
                command, check=False, stdin=subprocess.DEVNULL, env=_ENVIRONMENT
            )
    except TimeoutError as error:
        raise ChildTimeout("a table took too long") from error
    if ended.returncode != 0:
        structlog.get_logger(__name__).error("table_failed", text=ended.stderr[-2000:].decode())
        raise ChildCrashed(f"a table ended with exit code {ended.returncode}")
    return target


def _csv(plan: Plan, table: str, target: Path) -> None:
    """Write one table as CSV."""
    target.write_bytes(table_csv(plan, table))


def _parquet(plan: Plan, table: str, target: Path) -> None:
    """Write one table as Parquet."""
    from service.doors.plan_parquet import write_parquet  # noqa: PLC0415 - one form a process

    write_parquet(plan, table, target)


def _xlsx(plan: Plan, _table: str, target: Path) -> None:
    """Write all tables as a workbook."""
    from service.doors.plan_workbook import write_workbook  # noqa: PLC0415 - one form a process

    write_workbook(plan, target)


def _template(_plan: Plan, _table: str, target: Path) -> None:
    """Write the workbook to start from."""
    from service.doors.template_workbook import (  # noqa: PLC0415 - one form a process
        write_template as write,
    )

    write(target)


_FORMS: Final[Mapping[str, Callable[[Plan, str, Path], None]]] = {
    "csv": _csv,
    "parquet": _parquet,
    "xlsx": _xlsx,
    "template": _template,
}


def main() -> None:
    """Write one file: the arguments are the plan document, the form, the table, the file."""
    source, form, table, target = sys.argv[1:]
    _FORMS[form](orjson.loads(Path(source).read_bytes()), table, Path(target))


if __name__ == "__main__":
    main()
