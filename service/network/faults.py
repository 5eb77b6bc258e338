"""What is wrong with an input, and what is doubtful in it: all at once, each with its place."""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from enum import StrEnum

FAULTS_REPORTED_MAX = 100
VALUE_CHARACTERS_MAX = 200
EXAMPLES_MAX = 3


class Status(StrEnum):
    """What became of an input; the doors choose their own words and numbers for each."""

    ACCEPTED = "accepted"
    UNREADABLE = "unreadable"
    TOO_LARGE = "too_large"
    INVALID = "invalid"
    UNSUPPORTED = "unsupported"


@dataclass(frozen=True, slots=True, kw_only=True)
class Fault:
    """One mistake in an input.

    ``pointer`` is an RFC 6901 pointer into the body as sent, or ``?name`` for an option. ``code``
    is stable; ``detail`` says what is wrong and what to do; ``value`` is the offending value as
    text, cut at 200 characters, or None where there is none to show.
    """

    pointer: str
    code: str
    detail: str
    value: str | None = None

    def to_document(self) -> dict[str, object]:
        """Return the fault as a JSON object, in the order in which it is shown."""
        return {
            "pointer": self.pointer,
            "code": self.code,
            "detail": self.detail,
            "value": self.value,
        }

    @staticmethod
    def from_document(document: Mapping[str, object]) -> "Fault":
        """Read back what ``to_document`` wrote."""
        value = document["value"]
        return Fault(
            pointer=str(document["pointer"]),
            code=str(document["code"]),
            detail=str(document["detail"]),
            value=None if value is None else str(value),
        )


@dataclass(frozen=True, slots=True)
class Odd:
    """A cell of a file that is no value of any field: what it is, and the value to show for it.

    A workbook has such cells (an error, TRUE, a number that is not exact); JSON has none.
    """

    code: str
    detail: str
    value: str | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Caution:
    """One kind of doubt about an input that is planned all the same; travels with the plan.

    ``count`` places share it, of which ``examples`` shows up to three as (pointer, value).
    """

    code: str
    detail: str
    count: int
    examples: tuple[tuple[str, str | None], ...]

    def to_document(self) -> dict[str, object]:
        """Return the caution as a JSON object, in the order in which it is shown."""
        return {
            "code": self.code,
            "count": self.count,
            "detail": self.detail,
            "examples": [{"pointer": pointer, "value": value} for pointer, value in self.examples],
        }


@dataclass(slots=True)
class FaultList:
    """Collects faults and cautions; what is beyond the report is counted, never lost in silence.

    A check over a table reports its first rows and the number of all of them. Because each check
    goes through the rows in the order sent, the first hundred faults of all are among those kept.
    """

    kept: list[Fault] = field(default_factory=list)
    count: int = 0
    cautions: dict[str, Caution] = field(default_factory=dict)

    def add(self, pointer: str, code: str, detail: str, value: object = None) -> None:
        """Report one fault."""
        self.count += 1
        if len(self.kept) < 100 * FAULTS_REPORTED_MAX:
            self.kept.append(
                Fault(pointer=pointer, code=code, detail=detail, value=value_text(value))
            )

    def add_uncounted(self, number: int) -> None:
        """Count ``number`` more faults of a check whose first hundred were reported."""
        self.count += number

    def extend(self, faults: Iterable[Fault]) -> None:
        """Report faults found elsewhere."""
        for fault in faults:
            self.count += 1
            self.kept.append(fault)

    def caution(
        self,
        code: str,
        detail: str,
        examples: Sequence[tuple[str, object]],
        count: int | None = None,
    ) -> None:
        """Report a doubt; a second one of the same code adds to the first."""
        number = len(examples) if count is None else count
        if number == 0:
            return
        shown = tuple((pointer, value_text(value)) for pointer, value in examples[:EXAMPLES_MAX])
        former = self.cautions.get(code)
        if former is not None:
            number += former.count
            shown = (former.examples + shown)[:EXAMPLES_MAX]
        self.cautions[code] = Caution(code=code, detail=detail, count=number, examples=shown)


def value_text(value: object) -> str | None:
    """Return a value as it may be shown in a fault: text as it is, the rest as JSON would say."""
    if value is None:
        return None
    if isinstance(value, Odd):
        return value_text(value.value)
    if isinstance(value, str):
        text = value
    elif isinstance(value, bool):
        text = "true" if value else "false"
    elif isinstance(value, Mapping):
        text = "an object"
    elif isinstance(value, list | tuple):
        text = "an array"
    else:
        text = str(value)
    # Half of a surrogate pair cannot be written as UTF-8 again; the report must be.
    return text[:VALUE_CHARACTERS_MAX].encode("utf-8", "replace").decode("utf-8")


def pointer(*tokens: str | int) -> str:
    """Return the RFC 6901 pointer of a path of member names and array positions."""
    return "".join(f"/{str(token).replace('~', '~0').replace('/', '~1')}" for token in tokens)


def in_order(faults: Iterable[Fault], document: object) -> tuple[Fault, ...]:
    """Return faults in the order of their places in ``document``, the first hundred of them.

    What is missing from the document comes after what is there; options come first.
    """
    positions: dict[int, dict[str, int]] = {}

    def key(fault: Fault) -> tuple[tuple[int, str], ...]:
        place: list[tuple[int, str]] = []
        here = document
        if fault.pointer.startswith("?"):
            return ((-1, fault.pointer),)
        for raw in fault.pointer.split("/")[1:]:
            token = raw.replace("~1", "/").replace("~0", "~")
            if token.isascii() and token.isdigit() and not isinstance(here, dict):
                row = int(token[:18])
                place.append((row, token))
                here = here[row] if isinstance(here, list) and row < len(here) else None
            elif isinstance(here, dict):
                order = positions.setdefault(
                    id(here), {name: number for number, name in enumerate(here)}
                )
                place.append((order.get(token, len(order)), token))
                here = here.get(token)
            else:
                place.append((0, token))
                here = None
        return tuple(place)

    return tuple(sorted(faults, key=key)[:FAULTS_REPORTED_MAX])
