"""The logs: one JSON object a line, with the ids of what is going on."""

import io
import json
import logging
from collections.abc import Iterator

import pytest
import structlog

from service.telemetry import configure_logs, log_ids


@pytest.fixture
def log() -> Iterator[io.StringIO]:
    """Catch the log of one test and leave logging as it was."""
    root = logging.getLogger()
    handlers, level = root.handlers[:], root.level
    former = structlog.get_config()
    stream = io.StringIO()
    configure_logs("info", stream=stream)
    yield stream
    structlog.configure(**former)
    root.handlers[:], root.level = handlers, level


def _lines(log: io.StringIO) -> list[dict[str, object]]:
    return [json.loads(line) for line in log.getvalue().splitlines()]


def test_a_line_carries_the_ids_of_its_request_and_run(log: io.StringIO) -> None:
    """Someone who has a request id must find everything that was done for it."""
    with log_ids(request_id="req-7"), log_ids(run_id="run_8"):
        structlog.get_logger().info("claimed", attempt=1)

    (line,) = _lines(log)
    assert line["event"] == "claimed"
    assert (line["request_id"], line["run_id"], line["attempt"]) == ("req-7", "run_8", 1)
    assert line["level"] == "info"
    assert str(line["timestamp"]).endswith("Z")


def test_ids_end_with_their_block(log: io.StringIO) -> None:
    """A line under a stranger's id would be worse than one without."""
    with log_ids(request_id="req-7"):
        pass
    structlog.get_logger().info("idle")

    (line,) = _lines(log)
    assert "request_id" not in line


def test_lines_of_libraries_come_in_the_same_form(log: io.StringIO) -> None:
    """The web server logs with the standard library; one parser must read both."""
    with log_ids(request_id="req-7"):
        logging.getLogger("some.library").warning("slow %s", "disk")

    (line,) = _lines(log)
    assert (line["event"], line["logger"], line["request_id"]) == (
        "slow disk",
        "some.library",
        "req-7",
    )


def test_lines_below_the_level_are_left_out(log: io.StringIO) -> None:
    """Otherwise the level would be a decoration."""
    structlog.get_logger().debug("detail")
    logging.getLogger("some.library").info("all is well")

    assert log.getvalue() == ""


def test_an_exception_is_data_not_lines(log: io.StringIO) -> None:
    """A traceback over many lines cannot be searched for by request."""
    try:
        int("no salt")
    except ValueError:
        structlog.get_logger().exception("failed")

    (line,) = _lines(log)
    assert "no salt" in json.dumps(line["exception"])


def test_traceback_in_the_log_shows_no_values(log: io.StringIO) -> None:
    """A network, or the password of a database, may be in a variable when something fails."""
    secret = "pass" + "word"

    try:
        secret.index("no such part")
    except ValueError:
        structlog.get_logger().exception("failed")

    assert secret not in log.getvalue()
    assert "test_traceback_in_the_log_shows_no_values" in log.getvalue()
