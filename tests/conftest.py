"""What holds for every test: ``--long``, and no talk with other machines."""

import ipaddress
import sys
from collections.abc import Sequence

import pytest
import structlog
from hypothesis import settings

# Fixtures for both databases, wherever a test asks for them.
pytest_plugins = ("tests.databases",)

# The law is checked on the same examples everywhere, so that a red build is red for everybody;
# ``--long`` looks for new ones.
settings.register_profile("short", derandomize=True, deadline=None, max_examples=20)
settings.register_profile("long", deadline=None, max_examples=1000)


def pytest_addoption(parser: pytest.Parser) -> None:
    """Add ``--long``, which runs the full numbers of everything that is sampled otherwise."""
    parser.addoption("--long", action="store_true", help="run the full numbers")


def pytest_configure(config: pytest.Config) -> None:
    """Choose the examples that Hypothesis draws, and close the door to the network."""
    settings.load_profile("long" if config.getoption("--long") else "short")
    # Lines go where pytest keeps them for a test that fails, and tracebacks without the values of
    # variables, which may be megabytes.
    structlog.configure(
        processors=[
            structlog.processors.format_exc_info,
            structlog.processors.KeyValueRenderer(key_order=["event"]),
        ],
        logger_factory=structlog.stdlib.LoggerFactory(),
    )
    # An audit hook can be neither patched away nor removed by a library under test.
    sys.addaudithook(_refuse_other_machines)


def pytest_collection_modifyitems(config: pytest.Config, items: list[pytest.Item]) -> None:
    """Leave out what is marked long unless asked; pytest's closing line counts it."""
    if config.getoption("--long"):
        return
    long = [item for item in items if item.get_closest_marker("long")]
    if long:
        config.hook.pytest_deselected(items=long)
        items[:] = [item for item in items if not item.get_closest_marker("long")]


def _refuse_other_machines(event: str, arguments: Sequence[object]) -> None:
    """Raise when a test would reach an address that is not on this machine."""
    if event == "socket.connect":
        address = arguments[1]
        if isinstance(address, tuple):
            _refuse(str(address[0]))
    elif event == "socket.getaddrinfo":
        host = arguments[0]
        if isinstance(host, (str, bytes)):
            _refuse(host.decode() if isinstance(host, bytes) else host)


def _refuse(host: str) -> None:
    """Raise unless ``host`` is this machine."""
    if host in {"", "localhost"}:
        return
    try:
        inside = ipaddress.ip_address(host).is_loopback or ipaddress.ip_address(host) in {
            ipaddress.ip_address("0.0.0.0"),  # noqa: S104 - compared with, never bound
            ipaddress.ip_address("::"),
        }
    except ValueError:
        inside = False
    if not inside:
        raise RuntimeError(f"a test reached for {host!r}: the network is off in tests")
