"""Where and with what a run was made."""

import os
import platform
import re
import sys
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path

PACKAGES = ("lanewright", "ortools", "numpy", "scipy", "networkx", "orjson", "pyarrow")


def machine() -> dict[str, object]:
    """Return processor, cores and memory."""
    described = Path("/proc/cpuinfo").read_text(encoding="utf-8", errors="replace")
    model = re.search(r"^model name\s*:\s*(.+)$", described, flags=re.MULTILINE)
    pages = os.sysconf("SC_PHYS_PAGES") * os.sysconf("SC_PAGE_SIZE")
    return {
        "processor": model[1] if model else platform.machine(),
        "cores": len(os.sched_getaffinity(0)),
        "memory_gib": round(pages / 2**30, 1),
        "system": platform.system(),
    }


def versions(lemon: str | None) -> dict[str, str | None]:
    """Return the version of everything that takes part; None where it is absent."""
    return {
        "python": ".".join(map(str, sys.version_info[:3])),
        **{name: version(name) for name in PACKAGES},
        "lemon": lemon,
    }


def load() -> float:
    """Return how many processes wanted a core, on average over the last minute."""
    return round(os.getloadavg()[0], 2)


def now() -> str:
    """Return the moment as RFC 3339 in UTC."""
    return datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
