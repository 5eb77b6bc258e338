"""The options of a run as they are typed: the names of the HTTP interface, one spelling more each.

Values stay text here. ``network/options.py`` reads them, for this door and the other alike, so
that both refuse the same things in the same words.
"""

from typing import Annotated

import typer

from service.doors.command_line.ending import EndingError, Exit
from service.network.options import Options, read_options


def _option(name: str, help_text: str, metavar: str) -> object:
    """Return a text option that may be typed with hyphens or with underscores."""
    hyphens = f"--{name.replace('_', '-')}"
    spellings = (hyphens,) if "_" not in name else (hyphens, f"--{name}")
    return typer.Option(*spellings, help=help_text, metavar=metavar, show_default=False)


def _later(name: str) -> object:
    """Return an option that is refused by its name, as ``not_yet``, and not shown."""
    return typer.Option(f"--{name.replace('_', '-')}", f"--{name}", hidden=True)


File = Annotated[
    str,
    typer.Argument(
        metavar="FILE",
        help="The network: JSON, a zip or folder of tables, a workbook; - reads standard input.",
    ),
]
Shortages = Annotated[
    str | None,
    _option("shortages", "May demand stay short? Default allow.", "allow|forbid"),
]
WorthAtMost = Annotated[
    str | None,
    _option("worth_at_most", "Most that serving one item unit may cost.", "MONEY"),
]
DemandRounding = Annotated[
    str | None,
    _option("demand_rounding", "For demand off its item's step. Default refuse.", "refuse|up|down"),
]
BadRows = Annotated[
    str | None,
    _option("bad_rows", "For order lines that cannot be read. Default refuse.", "refuse|set_aside"),
]
Label = Annotated[str | None, _option("label", "Free text that stays with the run.", "TEXT")]
PlanFor = Annotated[
    str | None,
    _option("plan_for", "The day that is planned. Default the date of the cut-off.", "DATE"),
]
DeadlineSeconds = Annotated[
    str | None, _option("deadline_seconds", "Longest that planning may take. Default 60.", "1..900")
]
MaximumAgeMinutes = Annotated[
    str | None,
    _option("maximum_age_minutes", "Refuse stock counted longer before the cut-off.", "MINUTES"),
]
FairShares = Annotated[str | None, _later("fair_shares")]
FormerRun = Annotated[str | None, _later("former_run")]
Allowance = Annotated[str | None, _later("allowance")]
Gap = Annotated[str | None, _later("gap")]
AsJson = Annotated[
    bool, typer.Option("--json", help="Write JSON to standard output, faults included.")
]


def given_options(texts: dict[str, str | None]) -> Options:
    """Read the options that were typed.

    Raises ``EndingError`` with every fault of every option.
    """
    options, faults = read_options({name: text for name, text in texts.items() if text is not None})
    if options is None:
        raise EndingError(
            Exit.BAD_INPUT,
            "invalid",
            "an option cannot be used",
            faults=faults,
            fault_count=len(faults),
        )
    return options
