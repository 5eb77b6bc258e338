"""The whole input check: a spooled body in, a network in normal form or all its faults out.

This is all that an intake child runs. It writes nothing but its output folder, and what it returns
is small: the network itself goes to disk.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import orjson

from service.network.canonical import write_network
from service.network.faults import FAULTS_REPORTED_MAX, Fault, FaultList, Status, in_order
from service.network.files.definition_files import read_files
from service.network.files.json import read_json
from service.network.files.media_types import JSON, accepted_type, refusal_of
from service.network.files.places import Places
from service.network.files.unpack import unpack
from service.network.intake_files import INTAKE_FILE, NETWORK_FILE, RECEIVED_FILE
from service.network.options import Options
from service.network.reading import read_network
from service.network.table_fields import FLAT_FIELDS
from service.network.workload import likeness_of, workload_of

BYTES_MAX_DEFAULT = 1 << 30
NESTING_MAX_DEFAULT = 16


@dataclass(frozen=True, slots=True, kw_only=True)
class Limits:
    """What a body may be at most: bytes when unpacked, and levels of arrays and objects."""

    unpacked_bytes_max: int = BYTES_MAX_DEFAULT
    nesting_max: int = NESTING_MAX_DEFAULT


@dataclass(frozen=True, slots=True, kw_only=True)
class IntakeReport:
    """What the check found. ``faults`` are at most 100, in the order of their places.

    ``fault_count`` is how many there are in all; ``summary`` is what ``intake.json`` holds, None
    where the input was not accepted.
    """

    faults: tuple[Fault, ...]
    fault_count: int
    status: Status
    summary: Mapping[str, object] | None

    def to_document(self) -> dict[str, object]:
        """Return the report as a JSON object, for the pipe between processes."""
        return {
            "faults": [fault.to_document() for fault in self.faults],
            "fault_count": self.fault_count,
            "status": str(self.status),
            "summary": None if self.summary is None else dict(self.summary),
        }

    @staticmethod
    def from_document(document: Mapping[str, object]) -> "IntakeReport":
        """Read back what ``to_document`` wrote."""
        faults, summary, count = document["faults"], document["summary"], document["fault_count"]
        if not isinstance(faults, list) or not isinstance(count, int):
            raise TypeError("not the document of an intake report")
        if summary is not None and not isinstance(summary, dict):
            raise TypeError("not the document of an intake report")
        return IntakeReport(
            faults=tuple(Fault.from_document(fault) for fault in faults),
            fault_count=count,
            status=Status(str(document["status"])),
            summary=summary,
        )


def intake(  # noqa: PLR0913 - the six things that a child process is told, by name
    spool: Path,
    output: Path,
    *,
    options: Options,
    media_type: str,
    content_encoding: str | None,
    limits: Limits,
) -> IntakeReport:
    """Check the body in ``spool``; if it is sound, write what planning needs into ``output``.

    There are then ``received`` (the unpacked bytes), ``network.zip`` (the normal form) and
    ``intake.json`` (the summary). The folder must exist. ``media_type`` is the HTTP header's value.
    """
    kind = accepted_type(media_type)
    if kind is None:
        fault = Fault(
            pointer="",
            code="unsupported_media_type",
            detail=refusal_of(media_type),
            value=media_type[:200],
        )
        return _refused(Status.UNSUPPORTED, (fault,), 1)
    received = output / RECEIVED_FILE
    unpacked = unpack(
        spool,
        received,
        content_encoding=content_encoding,
        bytes_max=limits.unpacked_bytes_max,
    )
    if unpacked.fault is not None:
        return _refused(Status(unpacked.status), (unpacked.fault,), 1)
    read = (_read_json if kind == JSON else _read_files)(received, output, kind, limits)
    if isinstance(read, IntakeReport):
        return read
    document, places = read.document, read.places
    reading = read_network(document, options, read.faults)
    if reading.network is None or reading.cut_off is None:
        found = reading.faults
        shown = tuple(places.fault(fault) for fault in in_order(found.kept, document))
        return _refused(Status.INVALID, shown, found.count)
    network_digest = write_network(reading.network, output / NETWORK_FILE)
    plan_for = options.plan_for or reading.cut_off.local_date
    summary: dict[str, object] = {
        "cautions": [
            places.caution(caution).to_document() for caution in reading.faults.cautions.values()
        ],
        "set_aside": [places.set_aside(line) for line in reading.set_aside],
        "counts": dict(reading.counts),
        "request_digest": unpacked.digest,
        "network_digest": network_digest,
        "currency": reading.network.head["currency"],
        "cut_off": reading.network.head["cut_off"],
        "plan_for": plan_for.isoformat(),
        "name": reading.network.head.get("name"),
        "likeness": likeness_of(reading.network),
        "workload": workload_of(
            reading.network, file_bytes=(output / NETWORK_FILE).stat().st_size
        ).to_document(),
    }
    (output / INTAKE_FILE).write_bytes(orjson.dumps(summary))
    return IntakeReport(faults=(), fault_count=0, status=Status.ACCEPTED, summary=summary)


def _refused(status: Status, faults: tuple[Fault, ...], count: int) -> IntakeReport:
    """Return the report of an input that was not accepted."""
    return IntakeReport(faults=faults, fault_count=count, status=status, summary=None)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Definition:
    """What was sent, as a definition; ``places`` leads back to where each value was sent."""

    document: object
    places: Places
    faults: FaultList


def _read_json(
    received: Path, _folder: Path, _kind: str, limits: Limits
) -> "_Definition | IntakeReport":
    """Read a body of JSON."""
    parsed = read_json(received.read_bytes(), nesting_max=limits.nesting_max, tables=FLAT_FIELDS)
    if parsed.unreadable:
        return _refused(Status.UNREADABLE, parsed.unreadable, len(parsed.unreadable))
    if parsed.invalid:
        shown = parsed.invalid[:FAULTS_REPORTED_MAX]
        return _refused(Status.INVALID, shown, len(parsed.invalid))
    return _Definition(document=parsed.value, places=Places(), faults=FaultList())


def _read_files(
    received: Path, folder: Path, kind: str, limits: Limits
) -> "_Definition | IntakeReport":
    """Read a zip of tables or a workbook."""
    read = read_files(
        received,
        folder,
        media_type=kind,
        bytes_max=limits.unpacked_bytes_max,
        nesting_max=limits.nesting_max,
    )
    if read.unreadable is not None:
        status = Status.TOO_LARGE if read.too_large else Status.UNREADABLE
        return _refused(status, (read.unreadable,), 1)
    if read.document is None:
        shown = tuple(read.places.fault(fault) for fault in in_order(read.faults.kept, None))
        return _refused(Status.INVALID, shown, read.faults.count)
    return _Definition(document=read.document, places=read.places, faults=read.faults)
