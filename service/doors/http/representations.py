"""Which representation of a resource a client gets, and whether it has it already (RFC 9110)."""

from collections.abc import Sequence
from typing import Final

from starlette.datastructures import Headers

from service.doors.http import problem_kinds as kinds
from service.doors.http.problems import Problem

_NOTHING: Final = 0.0


def choose(headers: Headers, offered: Sequence[str]) -> str:
    """Return the one of ``offered`` that ``Accept`` likes best; the first of equals.

    Raises the problem 406 when it admits none. Without the header, everything is admitted.
    """
    fields = headers.getlist("accept")
    ranges = [part.strip() for field in fields for part in field.split(",") if part.strip()]
    if not ranges:
        return offered[0]
    liking = {media_type: _quality(media_type, ranges) for media_type in offered}
    best = max(offered, key=lambda media_type: liking[media_type])
    if liking[best] == _NOTHING:
        raise Problem(
            kinds.NOT_ACCEPTABLE,
            f"This resource is offered as {' or '.join(offered)}.",
            headers={"Vary": "Accept"},
            members={"offered": list(offered)},
        )
    return best


def _quality(media_type: str, ranges: Sequence[str]) -> float:
    """Return how much ``ranges`` like ``media_type``: the most specific one that fits decides."""
    kind = media_type.partition("/")[0]
    fitting = {media_type: 3, f"{kind}/*": 2, "*/*": 1}
    best = (0, _NOTHING)
    for text in ranges:
        name, *parameters = (part.strip().lower() for part in text.split(";"))
        best = max(best, (fitting.get(name, 0), _weight(parameters))) if name in fitting else best
    return best[1]


def _weight(parameters: Sequence[str]) -> float:
    """Return the weight ``q`` of a media range; one that cannot be read admits nothing."""
    for parameter in parameters:
        name, _, value = parameter.partition("=")
        if name.strip() == "q":
            try:
                weight = float(value)
            except ValueError:
                return _NOTHING
            return weight if _NOTHING <= weight <= 1 else _NOTHING
    return 1.0


def entity_tag(digest: str, *, form: str = "") -> str:
    """Return the strong entity tag of what has ``digest``, in one of several forms."""
    return f'"{digest};{form}"' if form else f'"{digest}"'


def already_held(headers: Headers, tag: str) -> bool:
    """Say whether ``If-None-Match`` names ``tag``, by the weak comparison of RFC 9110 8.8.3.2."""
    held = [part.strip() for field in headers.getlist("if-none-match") for part in field.split(",")]
    return "*" in held or tag in [part.removeprefix("W/") for part in held]
