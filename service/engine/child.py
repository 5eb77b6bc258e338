"""The program that a child process runs: take a task, do it, answer; nothing else.

It gets paths, options and limits over one socket and answers there with a framed message. It has
no database, no settings and an empty environment. A Python error that is not ``MemoryError`` is not
caught: the child dies with a traceback, and its supervisor knows what a death means.

Started by ``engine/children.py`` as ``python -m service.engine.child KIND DESCRIPTOR PARENT``.
"""

import ctypes
import gc
import os
import signal
import socket
import sys
import time
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

from service.engine.frames import Channel

Task = Mapping[str, Any]
Progress = Callable[[str, Mapping[str, int]], None]
Work = Callable[[Task, Progress], Mapping[str, object]]

PR_SET_PDEATHSIG = 1
# Halfway to "end this one first" (1000): when the machine runs out of memory the kernel shall take
# the child, whose run then fails with a reason, and not the service.
OOM_SCORE_ADJUSTMENT = 500
# So many objects more than before, of at least 64 bytes: some 32 MB.
GARBAGE_LOOKED_FOR_AFTER = 500_000
# Nobody looks more often, and a thousand small items would otherwise fill the log of the service.
TELL_SECONDS = 0.2


def intake_work() -> Work:
    """Return the input check, its modules already loaded."""
    from service.network.intake import Limits, intake  # noqa: PLC0415 - only this kind needs it
    from service.network.options import Options  # noqa: PLC0415 - likewise

    def work(task: Task, progress: Progress) -> Mapping[str, object]:
        progress("checking", {})
        report = intake(
            Path(task["spool"]),
            Path(task["folder"]),
            options=Options.from_document(task["options"]),
            media_type=task["media_type"],
            content_encoding=task["content_encoding"],
            limits=Limits(**task["limits"]),
        )
        # The summary lists every row set aside: too long for a message, and on disk already.
        return {**report.to_document(), "summary": None}

    return work


def plan_work() -> Work:
    """Return planning, with the solver already loaded."""
    from service.network.options import Options  # noqa: PLC0415 - only this kind needs it
    from service.planning.task import plan  # noqa: PLC0415 - likewise

    def work(task: Task, progress: Progress) -> Mapping[str, object]:
        outcome = plan(
            Path(task["source"]),
            Options.from_document(task["options"]),
            Path(task["target"]),
            progress=progress,
        )
        return {
            "state": outcome.state,
            "reason": outcome.reason,
            "detail": outcome.detail,
            "seconds": dict(outcome.seconds),
        }

    return work


def evidence_work() -> Work:
    """Return packing of evidence, its modules already loaded."""
    from service.runs.evidence import pack_evidence  # noqa: PLC0415 - only this kind needs it

    def work(task: Task, progress: Progress) -> Mapping[str, object]:
        progress("packing", {})
        pack_evidence(Path(task["source"]), Path(task["target"]))
        return {}

    return work


KINDS: Mapping[str, Callable[[], Work]] = {
    "intake": intake_work,
    "plan": plan_work,
    "evidence": evidence_work,
}


def die_with_parent(parent: int) -> None:
    """Ask the kernel to kill this process when the thread that started it ends.

    Without it a killed service would leave a solver behind that nobody can stop. The parent may
    have died before the kernel was asked; then it is no longer ours, and there is nobody to serve.
    """
    if sys.platform == "linux":
        libc = ctypes.CDLL(None, use_errno=True)
        if libc.prctl(PR_SET_PDEATHSIG, signal.SIGKILL, 0, 0, 0) != 0:
            raise OSError(ctypes.get_errno(), "prctl(PR_SET_PDEATHSIG)")
        if os.getppid() != parent:
            os._exit(0)


def offer_as_victim() -> None:
    """Raise the score by which the kernel chooses whom to end when memory runs out."""
    if sys.platform == "linux":
        Path("/proc/self/oom_score_adj").write_text(f"{OOM_SCORE_ADJUSTMENT}", encoding="ascii")


def limit_memory(memory_bytes: int | None) -> None:
    """Bound the address space from here on; None takes the bound away.

    Only the soft limit: a child is used for several tasks, and each brings its own. The supervisor
    watches the resident memory besides (``resident_bytes`` in ``engine/process.py``).
    """
    if sys.platform != "win32":
        import resource  # noqa: PLC0415 - does not exist on every platform

        _, hard = resource.getrlimit(resource.RLIMIT_AS)
        soft = hard if memory_bytes is None else memory_bytes
        if hard != resource.RLIM_INFINITY:
            soft = min(soft, hard) if soft != resource.RLIM_INFINITY else hard
        resource.setrlimit(resource.RLIMIT_AS, (soft, hard))


def keep_private() -> None:
    """Let nobody else read what is written, and write no memory image when the child crashes."""
    os.umask(0o077)
    if sys.platform != "win32":
        import resource  # noqa: PLC0415 - does not exist on every platform

        resource.setrlimit(resource.RLIMIT_CORE, (0, 0))


def collect_seldom() -> None:
    """Look for circular garbage now and then only, and never among what was loaded.

    What a task makes is mostly without circles and gone with it; to walk over all of it again and
    again took up to a third of the time of a check or a proof.
    """
    gc.collect()
    gc.freeze()
    gc.set_threshold(GARBAGE_LOOKED_FOR_AFTER, 10, 100)


class Teller:
    """Tells the supervisor how far the work is: every phase, but not every step of a long one."""

    def __init__(self, channel: Channel) -> None:
        """Tell over ``channel``."""
        self._channel = channel
        self._phase = ""
        self._told_at = 0.0
        self._untold: Mapping[str, int] | None = None

    def tell(self, phase: str, numbers: Mapping[str, int]) -> None:
        """Tell a phase at once, its repetition only when the last is a while ago."""
        now = time.monotonic()
        if phase == self._phase and now - self._told_at < TELL_SECONDS:
            self._untold = numbers
            return
        self.catch_up()
        self._phase = phase
        self._send(numbers)
        self._told_at = now

    def catch_up(self) -> None:
        """Tell what was held back, so that the last numbers of a phase are always known."""
        if self._untold is not None:
            self._send(self._untold)

    def _send(self, numbers: Mapping[str, int]) -> None:
        self._untold = None
        self._channel.send({"progress": self._phase, "numbers": dict(numbers)})


def serve(channel: Channel, work: Work) -> None:
    """Do one task after the other until the supervisor closes, or memory runs out."""
    channel.send({"ready": True})
    while (message := channel.receive()) is not None:
        limit_memory(message["memory_bytes"])  # type: ignore[arg-type] # our own supervisor's frame
        answer: Mapping[str, object] | None = None
        teller = Teller(channel)
        try:
            answer = work(message["task"], teller.tell)  # type: ignore[arg-type] # likewise
            teller.catch_up()
        except MemoryError:
            # What is left over of the task may hold the memory for good: say so and leave.
            limit_memory(None)
        if answer is None:
            channel.send({"memory": True})
            return
        limit_memory(None)
        channel.send({"answer": dict(answer)})


def main(kinds: Mapping[str, Callable[[], Work]] = KINDS) -> None:
    """Run the child: argument 1 is the kind of work, 2 the socket, 3 the parent's process id."""
    kind, descriptor, parent = sys.argv[1], int(sys.argv[2]), int(sys.argv[3])
    die_with_parent(parent)
    offer_as_victim()
    # Solvers print to standard output, which therefore must not be where answers go.
    os.dup2(2, 1)
    # The supervisor decides when a child ends; Ctrl-C in the terminal is meant for it alone.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    work = kinds[kind]()
    collect_seldom()
    # Only now, so that compiled modules that Python stores are for every user of the program.
    keep_private()
    serve(Channel(socket.socket(fileno=descriptor)), work)


if __name__ == "__main__":
    main()
