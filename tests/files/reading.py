"""A small sound network as tables of text, to be changed by one cell and read."""

import tempfile
from collections.abc import Mapping
from pathlib import Path

from service.network.faults import Fault, Status
from service.network.files.media_types import ZIP
from service.network.intake import IntakeReport, Limits
from service.network.options import Options
from tests.files.writing import take_in, zipped

# A salt producer with one depot and one yard; every table as its sender would write it.
TABLES: Mapping[str, str] = {
    "network": "format,currency,cut_off\n1,EUR,2026-02-03T16:00:00+01:00\n",
    "items": "id,unit,step\n0025,bag,0.1\n",
    "sites": "id,roles\nNORTH,warehouse\nYARD,ship_to\n",
    "supply": "site,item,quantity\nNORTH,0025,900\n",
    "demand": "reference,site,item,quantity\nSO-1,YARD,0025,880.5\n",
    "lanes": "origin,destination,unit_cost\nNORTH,YARD,0.215\n",
}


def files(**changed: str | bytes | None) -> dict[str, bytes]:
    """Return the tables as CSV files, some of them ``changed``; None leaves one out."""
    texts: dict[str, str | bytes | None] = {**TABLES, **changed}
    return {
        f"{name}.csv": text.encode() if isinstance(text, str) else text
        for name, text in texts.items()
        if text is not None
    }


def read(
    body: bytes | Mapping[str, bytes],
    media_type: str = ZIP,
    *,
    limits: Limits | None = None,
    options: Options | None = None,
) -> IntakeReport:
    """Return what the check says of a body, or of files in a zip."""
    data = body if isinstance(body, bytes) else zipped(body)
    with tempfile.TemporaryDirectory() as folder:
        return take_in(data, Path(folder), media_type=media_type, limits=limits, options=options)


def places(report: IntakeReport) -> list[tuple[str, str, str | None]]:
    """Return place, code and value of each fault."""
    return [told(fault) for fault in report.faults]


def told(fault: Fault) -> tuple[str, str, str | None]:
    """Return place, code and value of a fault."""
    return fault.pointer, fault.code, fault.value


def cautions(report: IntakeReport) -> dict[str, list[tuple[str, str | None]]]:
    """Return the places and values of each doubt by its code."""
    assert report.summary is not None, places(report)
    found = report.summary["cautions"]
    assert isinstance(found, list)
    return {
        caution["code"]: [(example["pointer"], example["value"]) for example in caution["examples"]]
        for caution in found
    }


def digest(report: IntakeReport) -> object:
    """Return the digest of an accepted network."""
    assert report.summary is not None, places(report)
    return report.summary["network_digest"]


def refused(report: IntakeReport) -> tuple[Status, str]:
    """Return how a body was refused as a whole."""
    (fault,) = report.faults
    return report.status, fault.code
