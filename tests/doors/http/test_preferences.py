"""``Prefer`` is read as RFC 7240 writes it, and what is not of that form is no preference."""

import time

import pytest

from service.doors.http.preferences import read_preferences


@pytest.mark.parametrize(
    ("fields", "preferences"),
    [
        # Examples of RFC 7240, sections 2 to 4.
        (["respond-async"], {"respond-async": ""}),
        (["respond-async, wait=100"], {"respond-async": "", "wait": "100"}),
        (["respond-async", "wait=100"], {"respond-async": "", "wait": "100"}),
        (['foo; bar=""'], {"foo": ""}),
        (['foo=""; bar'], {"foo": ""}),
        (["handling=lenient, wait=100, respond-async"],
         {"handling": "lenient", "wait": "100", "respond-async": ""}),
        # Names are alike whatever their case; of two with one name the first counts.
        (["Wait=1, WAIT=2", "wait=3"], {"wait": "1"}),
        # White space around everything, quoted words with what would else end them.
        (['\tWait = "1, 2;\\"3" ; a = b ;; c , X'], {"wait": '1, 2;"3', "x": ""}),
        # Not of the form: the field counts for nothing, the other field does.
        (["wait=1, =", "respond-async"], {"respond-async": ""}),
        (["wait=1 2"], {}),
        (['wait="1'], {}),
        ([""], {}),
        ([], {}),
    ],
)  # fmt: skip
def test_preferences_are_read(fields: list[str], preferences: dict[str, str]) -> None:
    """Each case is from the RFC or follows from its grammar."""
    assert read_preferences(fields) == preferences


@pytest.mark.parametrize("piece", [";", " ", ";a", "a ", "\t;", '"', 'a="\\', "a;" + " " * 50])
def test_long_fields_are_read_in_little_time(piece: str) -> None:
    """A pattern that backtracks would let one header stop the service."""
    field = "a" + piece * (16_000 // len(piece)) + "\x01"
    began = time.monotonic()

    read_preferences([field])

    assert time.monotonic() - began < 1
