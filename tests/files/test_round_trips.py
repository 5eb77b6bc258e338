"""A network means the same in every form: files written from it have its digest, to the decimal."""

import json
import tempfile
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given

from service.network.files.media_types import JSON
from service.network.intake import IntakeReport
from tests.files.odd_networks import documents
from tests.files.writing import FORMS, take_in


def checked(body: bytes, media_type: str) -> IntakeReport:
    """Return what the check says of a body."""
    with tempfile.TemporaryDirectory() as folder:
        return take_in(body, Path(folder), media_type=media_type)


def places_apart(report: IntakeReport) -> list[tuple[str, str | None]]:
    """Return the faults of a network but for where they are."""
    return sorted((fault.code, fault.value) for fault in report.faults)


@pytest.mark.parametrize("form", FORMS)
@given(document=documents())
def test_the_digest_is_the_same_in_every_form(form: str, document: Mapping[str, Any]) -> None:
    """The meaning is that of the JSON: awkward ids, the largest numbers, empty texts and all."""
    media_type, written = FORMS[form]
    expected = checked(json.dumps(document).encode(), JSON)

    found = checked(written(document), media_type)

    assert (found.status, places_apart(found)) == (expected.status, places_apart(expected))
    if expected.summary is not None and found.summary is not None:
        assert found.summary["network_digest"] == expected.summary["network_digest"]
        assert found.summary["counts"] == expected.summary["counts"]
