"""What may go wrong around a run, named for the fact; no door's vocabulary."""

from service.runs.run import Run


class RunUnknown(Exception):  # noqa: N818 - named for the fact, like every error of this house
    """No such run for this tenant."""


class ArtefactMissing(Exception):  # noqa: N818 - as above
    """The run is known, but in its state it has no such artefact."""

    def __init__(self, run: Run, artefact: str) -> None:
        """Remember which ``run`` was asked for which ``artefact``."""
        super().__init__(f"run {run.id} is {run.state} and has no {artefact}")
        self.run = run
        self.artefact = artefact


class BlobBroken(Exception):  # noqa: N818 - as above
    """A blob is missing, incomplete, or not what its digest says."""


class PlanTooLarge(Exception):  # noqa: N818 - as above
    """To plan the network would take more memory than planning is given."""

    def __init__(self, *, estimated_bytes: int, allowed_bytes: int) -> None:
        """Remember both numbers."""
        super().__init__(f"about {estimated_bytes} bytes where {allowed_bytes} are allowed")
        self.estimated_bytes = estimated_bytes
        self.allowed_bytes = allowed_bytes
        self.setting = "LANEWRIGHT_PLAN_MEMORY_BYTES_MAX"


class StoreUnavailable(Exception):  # noqa: N818 - as above
    """The database cannot be reached, or not in time; the same call may work later."""


class EngineLocked(Exception):  # noqa: N818 - as above
    """Another process executes the runs of this database."""


class ChildTimeout(Exception):  # noqa: N818 - as above
    """A child was ended at its time limit."""


class ChildMemory(Exception):  # noqa: N818 - as above
    """A child was ended, or gave up, at its memory limit."""


class ChildCrashed(Exception):  # noqa: N818 - as above
    """A child died by itself, or answered with something that is no answer."""


class ChildReleased(Exception):  # noqa: N818 - as above
    """A child was ended on purpose: the service drains, or the claim is gone."""
