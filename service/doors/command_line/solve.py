"""``lanewright solve``: plan a network without a server and without a database."""

import tempfile
import zipfile
from pathlib import Path
from typing import Annotated, Any

import orjson
import typer

from service.doors.command_line import parameters
from service.doors.command_line.backing import Backing
from service.doors.command_line.check import accepted
from service.doors.command_line.ending import EndingError, Exit, put, put_lines, tell
from service.doors.command_line.layout import count_of, mebibytes
from service.doors.command_line.plan_files import Parquet, Xlsx, write_files
from service.doors.command_line.progress import progress_bar
from service.doors.command_line.summary import summary_lines
from service.doors.plan_tables import COLUMNS, table_csv
from service.network.intake_files import NETWORK_FILE
from service.network.options import Options
from service.planning.outcome import CERTIFICATE_FILE, PLAN_FILE
from service.runs.faults import (
    ChildCrashed,
    ChildMemory,
    ChildReleased,
    ChildTimeout,
    PlanTooLarge,
)

Csv = Annotated[
    str | None,
    typer.Option("--csv", metavar="TABLE", help=f"Write one table as CSV: {', '.join(COLUMNS)}."),
]
Evidence = Annotated[
    Path | None,
    typer.Option("--evidence", metavar="ZIP", help="Also write network, plan and proof to a zip."),
]
RequireComplete = Annotated[
    bool, typer.Option("--require-complete", help="Exit with 4 when anything is short.")
]


def solve(  # noqa: PLR0913 - one parameter for each option that a person can type
    context: typer.Context,
    file: parameters.File,
    *,
    as_json: parameters.AsJson = False,
    csv: Csv = None,
    xlsx: Xlsx = None,
    parquet: Parquet = None,
    evidence: Evidence = None,
    require_complete: RequireComplete = False,
    shortages: parameters.Shortages = None,
    worth_at_most: parameters.WorthAtMost = None,
    demand_rounding: parameters.DemandRounding = None,
    bad_rows: parameters.BadRows = None,
    label: parameters.Label = None,
    plan_for: parameters.PlanFor = None,
    deadline_seconds: parameters.DeadlineSeconds = None,
    maximum_age_minutes: parameters.MaximumAgeMinutes = None,
    fair_shares: parameters.FairShares = None,
    former_run: parameters.FormerRun = None,
    allowance: parameters.Allowance = None,
    gap: parameters.Gap = None,
) -> None:
    """Plan a network and show what came of it.

    The summary, or the JSON or CSV that was asked for, goes to standard output, everything else to
    standard error. Exit codes: 0 done, 1 failed, 2 bad input or usage, 3 no plan exists, 4 with
    --require-complete something is short. Ctrl-C ends the planning at once.
    """
    options = parameters.given_options(
        {
            "shortages": shortages,
            "worth_at_most": worth_at_most,
            "demand_rounding": demand_rounding,
            "bad_rows": bad_rows,
            "label": label,
            "plan_for": plan_for,
            "deadline_seconds": deadline_seconds,
            "maximum_age_minutes": maximum_age_minutes,
            "fair_shares": fair_shares,
            "former_run": former_run,
            "allowance": allowance,
            "gap": gap,
        }
    )
    if csv is not None and as_json:
        raise EndingError(
            Exit.BAD_INPUT, "usage", "--json and --csv exclude each other: choose one"
        )
    if csv is not None and csv not in COLUMNS:
        detail = f"there is no table {csv!r}; the tables are {', '.join(COLUMNS)}"
        raise EndingError(Exit.BAD_INPUT, "usage", detail)
    backing = context.ensure_object(Backing)
    with tempfile.TemporaryDirectory(prefix="lanewright-") as name:
        folder = Path(name)
        _planned(backing, file, folder, options)
        plan_bytes = (folder / PLAN_FILE).read_bytes()
        if evidence is not None:
            _write_evidence(evidence, folder, options)
    plan: dict[str, Any] = orjson.loads(plan_bytes)
    write_files(plan, xlsx=xlsx, parquet=parquet)
    if as_json:
        put(plan_bytes + b"\n")
    elif csv is not None:
        put(table_csv(plan, csv))
    else:
        put_lines(summary_lines(plan))
    if plan["status"] == "no_plan":
        raise typer.Exit(Exit.NO_PLAN)
    if require_complete and plan["shortages"]:
        tell(f"lanewright: {count_of(len(plan['shortages']), 'shortage')}, and --require-complete")
        raise typer.Exit(Exit.INCOMPLETE)


def _planned(backing: Backing, file: str, folder: Path, options: Options) -> None:
    """Check and plan ``file`` in ``folder``; raise ``EndingError`` when there is no answer."""
    with progress_bar("checking") as moved:
        summary = accepted(backing, file, folder, options)
        moved("checked", summary["counts"])  # type: ignore[arg-type] # the intake counts rows
        try:
            outcome = backing.plan(folder, folder, options=options, on_progress=moved)
        except PlanTooLarge as error:
            detail = (
                f"planning would take about {mebibytes(error.estimated_bytes)}, and may take "
                f"{mebibytes(error.allowed_bytes)}: raise {error.setting} (bytes)"
            )
            raise EndingError(Exit.FAILED, "memory_limit", detail) from error
        except ChildTimeout as error:
            detail = f"no plan within {options.deadline_seconds} s: raise --deadline-seconds"
            raise EndingError(Exit.FAILED, "time_limit", detail) from error
        except ChildMemory as error:
            detail = "planning needs more memory than it may use (a setting, see README)"
            raise EndingError(Exit.FAILED, "memory_limit", detail) from error
        except (ChildCrashed, ChildReleased) as error:
            detail = f"planning broke off: {error}"
            raise EndingError(Exit.FAILED, "solver_crashed", detail) from error
    if outcome.state == "failed":
        detail = f"planning failed: {outcome.detail or outcome.reason}"
        raise EndingError(Exit.FAILED, str(outcome.reason), detail)


def _write_evidence(path: Path, folder: Path, options: Options) -> None:
    """Pack everything that a stranger needs to check the plan."""
    from service.proof.evidence import write_evidence  # noqa: PLC0415 - NumPy, only for --evidence

    with zipfile.ZipFile(folder / NETWORK_FILE) as network:
        entries = {name: network.read(name) for name in network.namelist()}
    certificate_bytes = (folder / CERTIFICATE_FILE).read_bytes()
    try:
        write_evidence(
            path,
            network_entries=entries,
            options=options,
            plan_bytes=(folder / PLAN_FILE).read_bytes(),
            certificate_bytes=certificate_bytes,
            history=[],
            versions=orjson.loads(certificate_bytes)["versions"],
        )
    except OSError as error:
        detail = f"{path} cannot be written: {error.strerror}"
        raise EndingError(Exit.FAILED, "unwritable", detail) from error
