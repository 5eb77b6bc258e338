"""Processes that watch the service from outside while another one loads it.

``python -m tests.benchmarks.watching memory PROCESS`` samples the memory of a process and all that
descend from it; ``... health PORT`` asks ``/healthz`` again and again. Both go on until standard
input ends, then say what they saw as one line of JSON.
"""

import http.client
import json
import sys
import threading
import time
from collections.abc import Sequence

from tests.benchmarks.stopwatch import family, resident_bytes

# Peaks of a body of a million lanes last for tens of milliseconds at least.
MEMORY_PERIOD_SECONDS = 0.005
FAMILY_PERIOD_SECONDS = 0.05
HEALTH_PERIOD_SECONDS = 0.002


def told_to_stop() -> threading.Event:
    """Return an event that is set when standard input ends."""
    stop = threading.Event()

    def wait() -> None:
        sys.stdin.read()
        stop.set()

    threading.Thread(target=wait, daemon=True).start()
    return stop


def memory(process: int) -> dict[str, float]:
    """Return the highest resident memory of a family, whoever has joined it meanwhile."""
    stop, peak, samples = told_to_stop(), 0, 0
    members, looked = family(process), time.monotonic()
    while not stop.wait(MEMORY_PERIOD_SECONDS):
        if time.monotonic() - looked > FAMILY_PERIOD_SECONDS:
            members, looked = family(process), time.monotonic()
        peak = max(peak, resident_bytes(members))
        samples += 1
    return {"peak_bytes": peak, "samples": samples}


def health(port: int) -> dict[str, float]:
    """Return how long ``/healthz`` took over one connection: count, median, p99, longest."""
    stop = told_to_stop()
    connection = http.client.HTTPConnection("127.0.0.1", port, timeout=60)
    taken: list[float] = []
    while not stop.wait(HEALTH_PERIOD_SECONDS):
        began = time.perf_counter()
        connection.request("GET", "/healthz")
        answer = connection.getresponse()
        answer.read()
        if answer.status != http.HTTPStatus.OK:
            raise RuntimeError(f"/healthz answered {answer.status}")
        taken.append(time.perf_counter() - began)
    connection.close()
    return {
        "count": len(taken),
        "p50_seconds": nearest_rank(taken, 50),
        "p99_seconds": nearest_rank(taken, 99),
        "longest_seconds": max(taken),
    }


def nearest_rank(values: Sequence[float], percent: int) -> float:
    """Return the nearest-rank percentile: the least value that ``percent`` of all do not exceed."""
    return sorted(values)[max(0, -(-len(values) * percent // 100) - 1)]


def main() -> None:
    """Watch what the command line says."""
    what, number = sys.argv[1], int(sys.argv[2])
    print(json.dumps({"memory": memory, "health": health}[what](number)))  # noqa: T201 - the answer


if __name__ == "__main__":
    main()
