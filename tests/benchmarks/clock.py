"""Seconds of each phase of a piece of work that tells its phases."""

import time
from collections.abc import Mapping


class PhaseClock:
    """Adds up wall and processor time by phase; a phase that is told again goes on."""

    def __init__(self) -> None:
        """Have seen nothing yet."""
        self.phases: dict[str, dict[str, float]] = {}
        self._since = (0.0, 0.0)

    def start(self) -> None:
        """Let the first phase begin now."""
        self._since = (time.perf_counter(), time.process_time())

    def seen(self, phase: str, counts: Mapping[str, int]) -> None:
        """End ``phase`` and begin the next."""
        del counts
        now = (time.perf_counter(), time.process_time())
        total = self.phases.setdefault(phase, {"seconds": 0.0, "cpu_seconds": 0.0})
        total["seconds"] += now[0] - self._since[0]
        total["cpu_seconds"] += now[1] - self._since[1]
        self._since = (time.perf_counter(), time.process_time())
