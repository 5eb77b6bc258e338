"""What the command line receives from ``main.py``: the work behind its commands, as calls.

Nothing is started before it is called, and what a command does not need is never imported: that is
how ``solve``, ``check`` and ``verify`` stay free of the database.
"""

from collections.abc import Callable, Mapping
from contextlib import AbstractContextManager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Protocol

if TYPE_CHECKING:
    from service.network.intake import IntakeReport
    from service.network.options import Options
    from service.planning.outcome import Outcome
    from service.runs.use_cases import Application

OnProgress = Callable[[str, Mapping[str, int]], None]


class NotReadyError(Exception):
    """A command cannot do its work here and now; the text says why and what to do."""


class IntakeWork(Protocol):
    """Checks a network in a supervised child of its own."""

    def __call__(
        self,
        spool: Path,
        folder: Path,
        *,
        options: "Options",
        media_type: str,
        content_encoding: str | None,
    ) -> "IntakeReport":
        """Check ``spool``; leave the normal form in ``folder``."""
        ...


class PlanWork(Protocol):
    """Plans a checked network in a supervised child of its own."""

    def __call__(
        self, source: Path, target: Path, *, options: "Options", on_progress: OnProgress
    ) -> "Outcome":
        """Plan the network in ``source``; leave plan and certificate in ``target``."""
        ...


class Serve(Protocol):
    """Runs the service until it is told to stop."""

    def __call__(self, *, port: int | None) -> None:
        """Serve on ``port``, or on that of the settings."""
        ...


@dataclass(frozen=True, slots=True, kw_only=True)
class Audit:
    """What an audit of the whole store found: ``intact``, ``broken`` or ``unreadable``."""

    verdict: str
    problems: tuple[Mapping[str, str], ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Backing:
    """All work behind the commands.

    ``application`` opens the store and runs the engine for as long as its block lasts; ``migrate``
    brings the database to the newest form and returns the revisions it applied; ``address`` is
    where ``serve`` would listen.
    """

    intake: IntakeWork
    plan: PlanWork
    application: Callable[[], AbstractContextManager["Application"]]
    serve: Serve
    migrate: Callable[[], list[str]]
    audit: Callable[[], Audit]
    address: Callable[[], str]
