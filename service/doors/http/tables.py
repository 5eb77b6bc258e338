"""A table of a plan as CSV, made where it stops nobody.

A million plan lines are seconds of Python. Beyond a small plan the work is done by a process of its
own, which knows nothing but two paths and a name, and is ended when it takes too long.
"""

import subprocess
import sys
from pathlib import Path
from typing import Final

import orjson
import structlog
from anyio import fail_after, run_process
from anyio.to_thread import run_sync

import service
from service.doors.plan_tables import table_csv
from service.runs.faults import ChildCrashed, ChildTimeout

# Up to here it takes a thread a few milliseconds, less than a process takes to start.
THREAD_BYTES_MAX: Final = 256 * 1024
SECONDS_MAX: Final = 120.0
# Where Python finds this package, and no secret of the service.
_ENVIRONMENT: Final = {"PYTHONPATH": str(Path(service.__path__[0]).parent), "PYTHONUTF8": "1"}


async def write_table(plan: bytes, table: str, folder: Path) -> Path:
    """Write ``table`` of the plan document ``plan`` as CSV into ``folder``; return the file."""
    target = folder / f"{table}.csv"
    if len(plan) <= THREAD_BYTES_MAX:
        await run_sync(lambda: target.write_bytes(table_csv(orjson.loads(plan), table)))
        return target
    source = folder / "plan.json"
    await run_sync(source.write_bytes, plan)
    command = [sys.executable, "-m", __name__, str(source), table, str(target)]
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


def main() -> None:
    """Write one table: argument 1 is the plan document, 2 the table, 3 the file to write."""
    source, table, target = sys.argv[1:]
    Path(target).write_bytes(table_csv(orjson.loads(Path(source).read_bytes()), table))


if __name__ == "__main__":
    main()
