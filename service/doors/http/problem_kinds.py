"""Every kind of problem that this door answers with, and what a reader of its page needs to know.

A kind is a promise: its address ``/problems/SLUG`` is the ``type`` of RFC 9457 and never changes
its meaning. Its further members are given where the problem is raised (search for the name of the
kind). ``tests/doors/http`` provokes each of them.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final


@dataclass(frozen=True, slots=True, kw_only=True)
class ProblemKind:
    """One kind: ``meaning`` says what happened, ``remedy`` what to do about it."""

    slug: str
    status: int
    title: str
    meaning: str
    remedy: str

    @property
    def address(self) -> str:
        """Return the ``type`` of the problem, which is also the path of its page."""
        return f"/problems/{self.slug}"


UNREADABLE_BODY: Final = ProblemKind(
    slug="unreadable-body",
    status=400,
    title="The body cannot be read",
    meaning="The body is not what its headers say: not JSON, cut off, nested too deeply, wrongly "
    "packed, or not UTF-8.",
    remedy="Look at the place that the problem names, mend the writer of the body, send it again.",
)
UNREADABLE_REQUEST: Final = ProblemKind(
    slug="unreadable-request",
    status=400,
    title="The request cannot be read",
    meaning="A part of the request other than its body is not in the form that HTTP prescribes.",
    remedy="Mend the part that the problem names.",
)
FOREIGN_ORIGIN: Final = ProblemKind(
    slug="foreign-origin",
    status=403,
    title="Pages of other origins may not ask",
    meaning="A browser sent the request on behalf of a page that does not come from this service.",
    remedy="Ask from a program, or from this service's own pages.",
)
NOT_FOUND: Final = ProblemKind(
    slug="not-found",
    status=404,
    title="There is nothing at this address",
    meaning="No resource of the service has this path.",
    remedy="Compare the path with the interface description at /docs. A path has no slash at its "
    "end.",
)
RUN_UNKNOWN: Final = ProblemKind(
    slug="run-unknown",
    status=404,
    title="There is no such run",
    meaning="No run with this id was stored, or it belongs to somebody else.",
    remedy="Use the id or the address that the service gave when the run was accepted.",
)
METHOD_NOT_ALLOWED: Final = ProblemKind(
    slug="method-not-allowed",
    status=405,
    title="The resource does not have this method",
    meaning="The address exists, but not for this method.",
    remedy="Use one of the methods in the header Allow.",
)
NOT_ACCEPTABLE: Final = ProblemKind(
    slug="not-acceptable",
    status=406,
    title="No representation that was asked for exists",
    meaning="The header Accept admits none of the media types in which this resource is offered.",
    remedy="Ask for one of the media types that the problem lists.",
)
BODY_TOO_SLOW: Final = ProblemKind(
    slug="body-too-slow",
    status=408,
    title="The body did not arrive in time",
    meaning="The sender paused longer than the service waits, or the whole body took too long.",
    remedy="Send the request again; on a slow line, pack the body with gzip or zstd.",
)
ARTEFACT_MISSING: Final = ProblemKind(
    slug="artefact-missing",
    status=409,
    title="The run has no such artefact in its state",
    meaning="The run is known, but it has not come to the point at which this artefact exists, or "
    "it ended without one. The member state says where it stands.",
    remedy="If the run waits or is running, ask again after the seconds in Retry-After. If it "
    "failed or was cancelled, read the run: it says why.",
)
BODY_TOO_LARGE: Final = ProblemKind(
    slug="body-too-large",
    status=413,
    title="The body is too large",
    meaning="The body is larger than the service accepts, on the wire or unpacked, or it needs "
    "more memory to check than the service gives.",
    remedy="Send lanes as columns or as cost tables, which are several times smaller, or have the "
    "limit raised by whoever runs the service.",
)
PLAN_TOO_LARGE: Final = ProblemKind(
    slug="plan-too-large",
    status=413,
    title="The network is too large to be planned here",
    meaning="To plan the network would take more memory than the service gives to planning, as "
    "estimated from its counts. The members estimated_bytes and allowed_bytes say how much, "
    "setting what limits it. Nothing was accepted.",
    remedy="Plan it in parts, for instance item by item, leave out lanes that nobody would use, or "
    "have the setting raised by whoever runs the service.",
)
ADDRESS_TOO_LONG: Final = ProblemKind(
    slug="address-too-long",
    status=414,
    title="The address is too long",
    meaning="Path and query together are longer than the service reads.",
    remedy="Shorten the options; the network itself belongs into the body.",
)
UNSUPPORTED_MEDIA_TYPE: Final = ProblemKind(
    slug="unsupported-media-type",
    status=415,
    title="The body is in a form that is not read here",
    meaning="Content-Type is missing or is not one that the service reads.",
    remedy="Send the network as JSON in UTF-8, as a zip of tables, or as an XLSX workbook.",
)
UNSUPPORTED_ENCODING: Final = ProblemKind(
    slug="unsupported-encoding",
    status=415,
    title="The body is packed in a way that is not read here",
    meaning="Content-Encoding names a packing, or several on top of each other, that the service "
    "does not unpack.",
    remedy="Send the body plain, or packed once with gzip or zstd.",
)
WRONG_HOST: Final = ProblemKind(
    slug="wrong-host",
    status=421,
    title="The request was meant for another host",
    meaning="The header Host names neither localhost nor a loopback address with the port of this "
    "service. Until there are keys, it serves this machine alone.",
    remedy="Address the service as localhost, 127.0.0.1 or [::1], with its port.",
)
INVALID_NETWORK: Final = ProblemKind(
    slug="invalid-network",
    status=422,
    title="The network has faults",
    meaning="The body is readable, but what it says cannot be planned. The member errors lists "
    "every fault with its place, a stable code, the value and what to do; error_count is the "
    "number of all of them, of which at most a hundred are listed.",
    remedy="Mend the faults. A fault with the code not_yet is about a part of the interface that "
    "is described but not built yet.",
)
INVALID_PARAMETERS: Final = ProblemKind(
    slug="invalid-parameters",
    status=422,
    title="The query parameters have faults",
    meaning="A query parameter is unknown, doubled, or has a value that it cannot have. The member "
    "errors lists every one.",
    remedy="Mend the parameters that are listed.",
)
NOT_YET: Final = ProblemKind(
    slug="not-yet",
    status=422,
    title="This part of the interface is not built yet",
    meaning="The request uses a part of the interface that is described but not built. It is "
    "refused rather than ignored.",
    remedy="Leave out what the problem names.",
)
HEADERS_TOO_LARGE: Final = ProblemKind(
    slug="headers-too-large",
    status=431,
    title="The header fields are too large",
    meaning="All header fields together are longer than the service reads.",
    remedy="Send fewer or shorter header fields.",
)
INTERNAL: Final = ProblemKind(
    slug="internal",
    status=500,
    title="The service made a mistake",
    meaning="Something happened that the service was not built for. It was logged with the "
    "request id. Nothing was accepted.",
    remedy="Try again once; then tell whoever runs the service the request id.",
)
BUSY: Final = ProblemKind(
    slug="busy",
    status=503,
    title="The service cannot do this now",
    meaning="Too many bodies are being checked, a check took longer than allowed, the database "
    "cannot be reached, or the service is stopping. Nothing was accepted.",
    remedy="Send the same request again after the seconds in Retry-After.",
)
NOT_READY: Final = ProblemKind(
    slug="not-ready",
    status=503,
    title="The service is not ready",
    meaning="Something that the service needs is missing. The member missing lists it.",
    remedy="Whoever runs the service: provide what is listed.",
)

KINDS: Final[Mapping[str, ProblemKind]] = {
    kind.slug: kind
    for kind in (
        UNREADABLE_BODY,
        UNREADABLE_REQUEST,
        FOREIGN_ORIGIN,
        NOT_FOUND,
        RUN_UNKNOWN,
        METHOD_NOT_ALLOWED,
        NOT_ACCEPTABLE,
        BODY_TOO_SLOW,
        ARTEFACT_MISSING,
        BODY_TOO_LARGE,
        PLAN_TOO_LARGE,
        ADDRESS_TOO_LONG,
        UNSUPPORTED_MEDIA_TYPE,
        UNSUPPORTED_ENCODING,
        WRONG_HOST,
        INVALID_NETWORK,
        INVALID_PARAMETERS,
        NOT_YET,
        HEADERS_TOO_LARGE,
        INTERNAL,
        BUSY,
        NOT_READY,
    )
}
