"""``lanewright check``: only the input check."""

import tempfile
from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING

import typer

from service.doors.command_line import parameters
from service.doors.command_line.backing import Backing
from service.doors.command_line.ending import EndingError, Exit, put_json, put_lines
from service.doors.command_line.layout import count_of
from service.doors.command_line.spool import spooled
from service.network.options import Options
from service.runs.faults import ChildCrashed, ChildMemory, ChildReleased, ChildTimeout

if TYPE_CHECKING:
    from service.network.intake import IntakeReport


def check(  # noqa: PLR0913 - one parameter for each option that a person can type
    context: typer.Context,
    file: parameters.File,
    *,
    demand_rounding: parameters.DemandRounding = None,
    bad_rows: parameters.BadRows = None,
    plan_for: parameters.PlanFor = None,
    maximum_age_minutes: parameters.MaximumAgeMinutes = None,
    as_json: parameters.AsJson = False,
) -> None:
    """Check a network and name everything that is wrong with it.

    Exit codes: 0 nothing is wrong, 1 the check failed, 2 something is.
    """
    options = parameters.given_options(
        {
            "demand_rounding": demand_rounding,
            "bad_rows": bad_rows,
            "plan_for": plan_for,
            "maximum_age_minutes": maximum_age_minutes,
        }
    )
    with tempfile.TemporaryDirectory(prefix="lanewright-") as folder:
        summary = accepted(context.ensure_object(Backing), file, Path(folder), options)
    if as_json:
        put_json({"status": "accepted"} | dict(summary))
    else:
        put_lines(_lines(summary))


def accepted(backing: Backing, file: str, folder: Path, options: Options) -> Mapping[str, object]:
    """Run the input check, leave the normal form in ``folder``, return what it counted.

    Raises ``EndingError`` with all faults when the network is not accepted.
    """
    source = spooled(file, folder)
    try:
        report = backing.intake(
            source.path,
            folder,
            options=options,
            media_type=source.media_type,
            content_encoding=source.content_encoding,
        )
    except ChildMemory as error:
        detail = "the network needs more memory than the check may use (a setting, see README)"
        raise EndingError(Exit.BAD_INPUT, "too_large", detail) from error
    except ChildTimeout as error:
        detail = "the check took longer than it may (a setting, see README)"
        raise EndingError(Exit.FAILED, "time_limit", detail) from error
    except (ChildCrashed, ChildReleased) as error:
        raise EndingError(Exit.FAILED, "internal", f"the check broke off: {error}") from error
    if report.summary is None:
        raise _refusal(report)
    return report.summary


def _refusal(report: "IntakeReport") -> EndingError:
    """Return how a command ends on a network that is not accepted."""
    kind = str(report.status).replace("_", " ")
    detail = f"the network is {kind}: {count_of(report.fault_count, 'fault')}"
    return EndingError(
        Exit.BAD_INPUT,
        str(report.status),
        detail,
        faults=report.faults,
        fault_count=report.fault_count,
    )


def _lines(summary: Mapping[str, object]) -> list[str]:
    """Return what a person reads of an accepted network."""
    counts = summary["counts"]
    cautions = summary["cautions"]
    aside = summary["set_aside"]
    assert isinstance(counts, Mapping)  # noqa: S101 - our own document
    assert isinstance(cautions, list)  # noqa: S101 - likewise
    assert isinstance(aside, list)  # noqa: S101 - likewise
    told = ", ".join(
        count_of(number, str(name).replace("_", " ").removesuffix("s"))
        for name, number in counts.items()
    )
    lines = [f"Nothing is wrong: {told}.", f"Network {summary['network_digest']}"]
    if aside:
        lines.append(
            f"{count_of(len(aside), 'order line')} set aside, because they cannot be read:"
        )
        lines += [f"  {row['pointer']} {row['reference'] or ''}".rstrip() for row in aside]
    if cautions:
        lines.append("Doubts:")
    for caution in cautions:
        places = ", ".join(example["pointer"] for example in caution["examples"])
        lines.append(f"  {caution['detail']} ({count_of(caution['count'], 'case')}, as {places})")
    return lines
