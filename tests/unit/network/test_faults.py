"""Faults: their places, their order, and that none is lost beyond the report."""

import pytest

from service.network.faults import Fault, FaultList, in_order, pointer, value_text


def test_pointers_escape_as_rfc_6901_says() -> None:
    """Source: RFC 6901, section 5: "/a~1b" and "/m~0n" are the members "a/b" and "m~n"."""
    assert pointer("a/b") == "/a~1b"
    assert pointer("m~n") == "/m~0n"
    assert pointer("lanes", 3, "unit_cost") == "/lanes/3/unit_cost"
    assert pointer() == ""


def test_faults_come_in_the_order_of_the_document() -> None:
    """A client mends from top to bottom: rows by number, names as they were sent."""
    document = {"sites": [{}] * 12, "items": [{"unit": "", "id": ""}], "lanes": None}
    places = ["?label", "/sites/2/id", "/sites/10/id", "/items/0/unit", "/items/0/id", "/lanes/9/x"]
    places += ["/lanes/10/x", "/missing"]
    faults = [Fault(pointer=place, code="c", detail="d") for place in reversed(places)]

    assert [fault.pointer for fault in in_order(faults, document)] == places


def test_at_most_a_hundred_faults_are_shown_and_all_are_counted() -> None:
    """A million bad rows must not make a report of a million."""
    faults = FaultList()
    for row in range(150):
        faults.add(f"/lanes/{row}", "c", "d")
    faults.add_uncounted(50)

    assert faults.count == 200
    assert len(in_order(faults.kept, {"lanes": None})) == 100


def test_cautions_of_one_code_are_one_caution() -> None:
    """The plan carries kinds of doubt, with three examples, not a list of rows."""
    faults = FaultList()
    faults.caution("c", "d", [("/a", 1), ("/b", 2)], 7)
    faults.caution("c", "d", [("/c", 3), ("/d", 4)])
    faults.caution("never", "d", [])

    assert list(faults.cautions) == ["c"]
    assert faults.cautions["c"].to_document() == {
        "code": "c",
        "count": 9,
        "detail": "d",
        "examples": [
            {"pointer": "/a", "value": "1"},
            {"pointer": "/b", "value": "2"},
            {"pointer": "/c", "value": "3"},
        ],
    }


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (None, None),
        (True, "true"),
        ({"a": 1}, "an object"),
        ([1], "an array"),
        ("x" * 300, "x" * 200),
        ("\ud800", "?"),
    ],
)
def test_values_are_shown_as_text_that_can_be_sent(value: object, text: str | None) -> None:
    """What is echoed is cut at 200 characters and always encodable."""
    assert value_text(value) == text


def test_a_fault_survives_the_pipe() -> None:
    """The child process sends faults as JSON."""
    fault = Fault(pointer="/a", code="c", detail="d", value=None)

    assert Fault.from_document(fault.to_document()) == fault
