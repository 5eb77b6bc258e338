"""``lanewright verify``: check an evidence zip again, without a solver and without the service."""

from pathlib import Path
from typing import Annotated

import typer

from service.doors.command_line import parameters
from service.doors.command_line.ending import Exit, put_json, put_lines

PROBLEMS_SHOWN = 100

CODES = {"intact": Exit.DONE, "broken": Exit.FAILED, "unreadable": Exit.BAD_INPUT}

Zip = Annotated[Path, typer.Argument(metavar="ZIP", help="An evidence zip.", show_default=False)]


def verify(evidence: Zip, *, as_json: parameters.AsJson = False) -> None:
    """Check network, plan, proof and history in an evidence zip again.

    Exit codes: 0 intact, 1 broken, 2 unreadable. The zip also holds verify.py, written separately,
    which says the same with nothing but Python.
    """
    from service.proof.evidence import verify_evidence  # noqa: PLC0415 - NumPy, only needed here

    verdict = verify_evidence(evidence)
    problems = [
        {"code": problem.code, "place": problem.place, "detail": problem.detail}
        for problem in verdict.problems
    ]
    if as_json:
        put_json({"verdict": verdict.verdict, "problems": problems})
    else:
        put_lines(
            [
                str(verdict.verdict),
                *(
                    f"  {problem['place']}: {problem['detail']} [{problem['code']}]"
                    for problem in problems[:PROBLEMS_SHOWN]
                ),
            ]
        )
    raise typer.Exit(CODES[verdict.verdict])
