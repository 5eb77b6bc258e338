"""Structured logs: one JSON object a line on standard error, with the ids of request and run.

The ids travel in context variables, so a line written deep inside a use case carries the id of the
request it serves without anybody passing it along.
"""

import logging
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any, TextIO

import orjson
import structlog

_LEVELS = {
    "debug": logging.DEBUG,
    "info": logging.INFO,
    "warning": logging.WARNING,
    "error": logging.ERROR,
}


def configure_logs(level: str = "info", *, stream: TextIO | None = None) -> None:
    """Write every log line from ``level`` on as JSON to ``stream`` (standard error if absent).

    Lines of libraries that use the standard library's ``logging`` come out in the same form, so
    that whoever collects the logs needs one parser; only warnings and worse, for what they do when
    all is well is their own affair.
    """
    out = sys.stderr if stream is None else stream
    shared: list[structlog.typing.Processor] = [
        structlog.contextvars.merge_contextvars,
        structlog.processors.add_log_level,
        structlog.processors.TimeStamper(fmt="iso", utc=True),
        # Without local variables: among them are networks of clients and addresses with passwords.
        structlog.processors.ExceptionRenderer(
            structlog.tracebacks.ExceptionDictTransformer(show_locals=False)
        ),
    ]
    structlog.configure(
        processors=[*shared, structlog.processors.JSONRenderer(serializer=_json)],
        wrapper_class=structlog.make_filtering_bound_logger(_LEVELS[level]),
        logger_factory=structlog.PrintLoggerFactory(file=out),
        # A cached logger would keep the stream of the first caller: tests and children have others.
        cache_logger_on_first_use=False,
    )
    handler = logging.StreamHandler(out)
    handler.setFormatter(
        structlog.stdlib.ProcessorFormatter(
            foreign_pre_chain=[*shared, structlog.stdlib.add_logger_name],
            processors=[
                structlog.stdlib.ProcessorFormatter.remove_processors_meta,
                structlog.processors.JSONRenderer(serializer=_json),
            ],
        )
    )
    root = logging.getLogger()
    root.handlers[:] = [handler]
    root.setLevel(max(_LEVELS[level], logging.WARNING))


@contextmanager
def log_ids(*, request_id: str | None = None, run_id: str | None = None) -> Iterator[None]:
    """Put the given ids on every line that is logged inside the ``with`` block."""
    given = {"request_id": request_id, "run_id": run_id}
    with structlog.contextvars.bound_contextvars(
        **{name: value for name, value in given.items() if value is not None}
    ):
        yield


def _json(document: dict[str, Any], **_options: object) -> str:
    """Return one line of JSON; what JSON does not know is written as its text."""
    return orjson.dumps(document, default=str).decode()
