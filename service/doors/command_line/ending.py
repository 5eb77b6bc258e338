"""How a command ends when it cannot do what was asked: exit codes, and faults for two readers."""

import sys
from collections.abc import Sequence
from enum import IntEnum

import orjson

from service.network.faults import Fault


class Exit(IntEnum):
    """The exit codes of every command; Ctrl-C ends with 130, as shells expect."""

    DONE = 0
    FAILED = 1
    BAD_INPUT = 2
    NO_PLAN = 3
    INCOMPLETE = 4


class EndingError(Exception):
    """Ends a command with ``code``; carries what a person and a program are told.

    ``status`` is one word for a program. ``fault_count`` is the number of all faults, of which
    ``faults`` holds those that are reported.
    """

    def __init__(
        self,
        code: Exit,
        status: str,
        detail: str,
        *,
        faults: Sequence[Fault] = (),
        fault_count: int = 0,
    ) -> None:
        """Remember everything; nothing is printed here."""
        super().__init__(detail)
        self.code = code
        self.status = status
        self.detail = detail
        self.faults = tuple(faults)
        self.fault_count = fault_count

    def lines(self) -> list[str]:
        """Return what a person reads."""
        lines = [f"lanewright: {self.detail}"]
        for fault in self.faults:
            shown = fault.pointer and fault.value is not None
            value = f" (it says {fault.value!r})" if shown else ""
            lines.append(f"  {_place(fault)}{value}")
            lines.append(f"      {fault.detail} [{fault.code}]")
        more = self.fault_count - len(self.faults)
        if more > 0:
            lines.append(f"  and {more} more")
        return lines

    def document(self) -> dict[str, object]:
        """Return what a program reads."""
        return {
            "status": self.status,
            "detail": self.detail,
            "fault_count": self.fault_count,
            "errors": [fault.to_document() for fault in self.faults],
        }


def tell(text: str) -> None:
    """Print a line that is not data."""
    print(text, file=sys.stderr, flush=True)  # noqa: T201 - standard error of a command


def put(data: bytes) -> None:
    """Write data to standard output, as bytes: a plan is not re-encoded for the terminal."""
    sys.stdout.flush()
    sys.stdout.buffer.write(data)
    sys.stdout.buffer.flush()


def put_json(document: object) -> None:
    """Write a document to standard output, a line for itself."""
    put(orjson.dumps(document, option=orjson.OPT_APPEND_NEWLINE))


def put_lines(lines: Sequence[str]) -> None:
    """Write lines to standard output."""
    put("".join(f"{line}\n" for line in lines).encode())


def _place(fault: Fault) -> str:
    """Return where a fault is, in words that fit an option and a file."""
    if fault.pointer.startswith("?"):
        return f"option {fault.pointer[1:]}"
    return fault.pointer or "the whole input"
