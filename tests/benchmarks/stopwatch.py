"""How long a piece of work took, and what memory it added: of this process, or of a family of them.

Linux only: the numbers are the kernel's own, in ``/proc``.
"""

import os
import time
from dataclasses import dataclass, field
from pathlib import Path
from typing import Self

_PAGE = os.sysconf("SC_PAGE_SIZE")
_TICKS = os.sysconf("SC_CLK_TCK")


@dataclass(slots=True)
class Stopwatch:
    """Measures the block that it surrounds."""

    seconds: float = 0.0
    cpu_seconds: float = 0.0
    added_bytes: int = 0
    peak_bytes: int = 0
    _began: tuple[float, float] = field(default=(0.0, 0.0))
    _resident: int = 0

    def __enter__(self) -> Self:
        """Forget the highest memory so far, and start."""
        # 5 sets the peak back to what is resident now: proc(5), since Linux 4.0.
        Path("/proc/self/clear_refs").write_text("5", encoding="ascii")
        self._resident = _own("VmHWM")
        self._began = (time.perf_counter(), time.process_time())
        return self

    def __exit__(self, *_: object) -> None:
        """Stop."""
        self.seconds = time.perf_counter() - self._began[0]
        self.cpu_seconds = time.process_time() - self._began[1]
        self.peak_bytes = _own("VmHWM")
        self.added_bytes = self.peak_bytes - self._resident

    def to_document(self) -> dict[str, float]:
        """Return what was measured."""
        return {
            "seconds": self.seconds,
            "cpu_seconds": self.cpu_seconds,
            "added_bytes": self.added_bytes,
            "peak_bytes": self.peak_bytes,
        }


def _own(name: str) -> int:
    """Return a number of this process's status, in bytes."""
    for line in Path("/proc/self/status").read_text(encoding="ascii").splitlines():
        if line.startswith(f"{name}:"):
            return int(line.split()[1]) * 1024
    raise LookupError(name)


def family(root: int) -> list[int]:
    """Return a process and all that descend from it, as far as they still run."""
    parents: dict[int, int] = {}
    for entry in Path("/proc").iterdir():
        if entry.name.isdigit() and (fields := _stat(int(entry.name))) is not None:
            parents[int(entry.name)] = int(fields[1])
    found = [root]
    for process in found:
        found += [child for child, parent in parents.items() if parent == process]
    return found


def resident_bytes(processes: list[int]) -> int:
    """Return the resident memory of all ``processes``; what they share counts for each of them."""
    pages = 0
    for process in processes:
        try:
            pages += int(Path(f"/proc/{process}/statm").read_text(encoding="ascii").split()[1])
        except OSError:
            continue  # it has ended meanwhile
    return pages * _PAGE


def worked_seconds(root: int) -> float:
    """Return the processor time of a process, its family and all of it that has ended already."""
    ticks = 0
    for process in family(root):
        fields = _stat(process)
        if fields is not None:
            ticks += sum(map(int, fields[11:15]))
    return ticks / _TICKS


def _stat(process: int) -> list[str] | None:
    """Return the fields of a process's stat from its state on, None if it has ended."""
    try:
        text = Path(f"/proc/{process}/stat").read_text(encoding="ascii", errors="replace")
    except OSError:
        return None
    return text.rpartition(")")[2].split()
