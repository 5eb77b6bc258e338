"""``Accept`` and ``If-None-Match`` are read as RFC 9110 writes them."""

import pytest
from starlette.datastructures import Headers

from service.doors.http.problems import Problem
from service.doors.http.representations import already_held, choose

JSON, CSV = "application/json", "text/csv"


@pytest.mark.parametrize(
    ("accept", "chosen"),
    [
        ([], JSON),
        ([""], JSON),
        (["*/*"], JSON),
        (["text/csv"], CSV),
        (["TEXT/CSV ; header=present"], CSV),
        (["text/*"], CSV),
        (["application/json;q=0.5, text/csv"], CSV),
        (["application/json;q=0.5", "text/csv;q=0.4"], JSON),
        # The more specific range decides, whatever its weight and place (12.5.1).
        (["text/csv;q=0.1, */*"], JSON),
        (["*/*;q=0.1, application/json;q=0"], CSV),
        (["application/*;q=0.2, application/json;q=0.1, text/csv;q=0.15"], CSV),
        (["text/html, application/xhtml+xml, */*;q=0.8"], JSON),
    ],
)
def test_best_liked_representation_is_chosen(accept: list[str], chosen: str) -> None:
    """Of equals it is the first that is offered."""
    headers = Headers(raw=[(b"accept", text.encode()) for text in accept])

    assert choose(headers, [JSON, CSV]) == chosen


@pytest.mark.parametrize(
    "accept", ["text/html", "*/*;q=0", "json", "application/json;q=2", "*/*;q=nan", "*/*;q=x", ",;"]
)
def test_nothing_that_is_offered_is_acceptable(accept: str) -> None:
    """A weight that cannot be read admits nothing: to guess one would be to guess the answer."""
    with pytest.raises(Problem) as raised:
        choose(Headers({"accept": accept}), [JSON, CSV])

    assert raised.value.kind.status == 406


@pytest.mark.parametrize(
    ("held", "same"),
    [
        ('"a"', True),
        ('W/"a"', True),
        ('"b", "a"', True),
        ("*", True),
        ('"b"', False),
        ("a", False),
        ('"A"', False),
        ("", False),
    ],
)
def test_entity_tags_are_compared_weakly(held: str, *, same: bool) -> None:
    """RFC 9110, 13.1.2: the mark of weakness does not count here."""
    assert already_held(Headers({"if-none-match": held}), '"a"') is same
