"""One supervised child process: how a solver that hangs, crashes or eats memory is survived.

A solver in C++ can hang while it holds Python's global lock, or take its process with it. So it
works in a process of its own, in its own session, which is killed as a group at its time limit.
Every way in which a child can fail is an exception here; only a whole framed answer is an answer.
"""

import os
import selectors
import signal
import socket
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path

import structlog

import service
from service.engine.frames import FrameBroken, FrameReader, framed
from service.runs.faults import ChildCrashed, ChildMemory, ChildReleased, ChildTimeout

# A child that was used this often, or for an input this large, leaves: allocators keep what
# they got, and fragments add up.
TASKS_MAX = 100
INPUT_BYTES_FOR_REUSE_MAX = 50_000_000
RESIDENT_BYTES_FOR_REUSE_MAX = 512 * 2**20

START_SECONDS_MAX = 60.0
# How often limits are looked at while a child works; 0.1 s cost nothing and keep a release quick.
POLL_SECONDS = 0.1
SEND_SECONDS_MAX = 5.0
LEAVE_SECONDS_MAX = 1.0
CHATTER_BYTES_MAX = 8192

OnProgress = Callable[[str, Mapping[str, int]], None]

_log = structlog.get_logger(__name__)


def child_environment() -> dict[str, str]:
    """Return the whole environment of a child: where Python finds this package, and no secret.

    One thread for linear algebra: a child has one core's worth of work, and its memory limit counts
    the stacks of idle threads.
    """
    environment = {
        "PYTHONPATH": str(Path(service.__path__[0]).parent),
        "PYTHONUTF8": "1",
        "PYTHONUNBUFFERED": "1",
        "OMP_NUM_THREADS": "1",
        "OPENBLAS_NUM_THREADS": "1",
    }
    if "SYSTEMROOT" in os.environ:  # Python on Windows cannot start without it.
        environment["SYSTEMROOT"] = os.environ["SYSTEMROOT"]
    return environment


class Child:
    """One process and the talk with it; one caller at a time."""

    def __init__(self, command: Sequence[str], kind: str) -> None:
        """Start the process; the calling thread must live as long as the child may."""
        self.kind = kind
        self.tasks = 0
        self._reader = FrameReader()
        self._chatter = bytearray()
        self._chatter_dropped = 0
        self._ready = False
        ours, theirs = socket.socketpair()
        with theirs:
            self._connection = ours
            self._process = subprocess.Popen(  # noqa: S603 - our own interpreter and module
                [*command, kind, str(theirs.fileno()), str(os.getpid())],
                stdin=subprocess.DEVNULL,
                stdout=subprocess.PIPE,
                stderr=subprocess.STDOUT,
                pass_fds=(theirs.fileno(),),
                start_new_session=True,
                env=child_environment(),
            )
        output = self._process.stdout
        assert output is not None  # noqa: S101 - a pipe was asked for
        self._output = output
        os.set_blocking(self._output.fileno(), False)
        self._connection.settimeout(0)

    @property
    def pid(self) -> int:
        """Return the process id, which is also that of its group."""
        return self._process.pid

    def alive(self) -> bool:
        """Say whether the process still runs; a dead one is left for ``end`` to reap."""
        if self._process.returncode is not None:
            return False
        if sys.platform == "win32":
            return self._process.poll() is None
        look = os.WEXITED | os.WNOHANG | os.WNOWAIT
        return os.waitid(os.P_PID, self.pid, look) is None

    def worn(self, input_bytes: int) -> bool:
        """Say whether the child should leave after a task on ``input_bytes``."""
        return (
            self.tasks >= TASKS_MAX
            or input_bytes > INPUT_BYTES_FOR_REUSE_MAX
            or resident_bytes(self.pid) > RESIDENT_BYTES_FOR_REUSE_MAX
        )

    def ask(
        self,
        task: Mapping[str, object],
        *,
        seconds: float,
        memory_bytes: int,
        released: threading.Event,
        on_progress: OnProgress | None = None,
    ) -> Mapping[str, object]:
        """Have ``task`` done and return the answer.

        ``seconds`` count from the moment at which the child, warm, has the task. When this raises
        anything, the process is dead.

        Raises
        ------
        ChildTimeout, ChildMemory, ChildCrashed
            As named. ``ChildCrashed`` also when what came back is no answer.
        ChildReleased
            When ``released`` was set meanwhile.
        """
        answered = False
        try:
            self._await_ready(released)
            self._send({"task": dict(task), "memory_bytes": memory_bytes})
            until = time.monotonic() + seconds
            while True:
                message = self._next(until=until, memory_bytes=memory_bytes, released=released)
                if message.get("memory") is True:
                    raise ChildMemory(f"needed more than {memory_bytes} bytes")
                if isinstance(answer := message.get("answer"), dict):
                    self.tasks += 1
                    answered = True
                    return answer
                self._report(message, on_progress)
        except FrameBroken as error:
            raise ChildCrashed(str(error)) from error
        finally:
            if not answered:
                self.end()
            self._log_chatter()

    def end(self) -> None:
        """Kill the process and everything it started, and wait until it is gone."""
        if self._process.returncode is None:
            # The group before the wait: as long as its leader is not reaped, the number is its own.
            _kill_group(self.pid)
            self._process.wait()
        self._connection.close()
        if not self._output.closed:
            self._drain_output()
            self._output.close()

    def _await_ready(self, released: threading.Event) -> None:
        """Wait until the child has loaded its modules; only once in its life."""
        if self._ready:
            return
        until = time.monotonic() + START_SECONDS_MAX
        try:
            message = self._next(until=until, memory_bytes=None, released=released)
        except ChildTimeout as error:
            raise ChildCrashed(f"did not start within {START_SECONDS_MAX} s") from error
        if message.get("ready") is not True:
            raise ChildCrashed("spoke before it was ready")
        self._ready = True

    def _send(self, message: Mapping[str, object]) -> None:
        """Send a task, which is small and meets a child that waits for it."""
        self._connection.settimeout(SEND_SECONDS_MAX)
        try:
            self._connection.sendall(framed(message))
        except OSError as error:
            raise ChildCrashed("did not take the task") from error
        finally:
            self._connection.settimeout(0)

    def _next(
        self, *, until: float, memory_bytes: int | None, released: threading.Event
    ) -> dict[str, object]:
        """Return the next message, keeping every limit while waiting for it."""
        with selectors.DefaultSelector() as selector:
            selector.register(self._connection, selectors.EVENT_READ)
            output_open = True
            selector.register(self._output, selectors.EVENT_READ)
            while (message := self._reader.message()) is None:
                if released.is_set():
                    raise ChildReleased("was ended on purpose")
                left = until - time.monotonic()
                if left <= 0:
                    raise ChildTimeout("was ended at its time limit")
                if memory_bytes is not None and resident_bytes(self.pid) > memory_bytes:
                    raise ChildMemory(f"held more than {memory_bytes} bytes")
                for key, _ in selector.select(min(left, POLL_SECONDS)):
                    if key.fileobj is self._connection:
                        self._receive()
                    elif output_open and not self._drain_output():
                        # It closed its output, which is no reason to watch it spin.
                        output_open = False
                        selector.unregister(self._output)
        return message

    def _receive(self) -> None:
        """Take in what the child sent; its end is an error, because an answer came before."""
        try:
            piece = self._connection.recv(65536)
        except ConnectionError:
            piece = b""
        if not piece:
            # It closes its sockets a moment before it ends; how it ends is worth that moment.
            until = time.monotonic() + LEAVE_SECONDS_MAX
            while self.alive() and time.monotonic() < until:
                time.sleep(LEAVE_SECONDS_MAX / 100)
            _kill_group(self.pid)
            code = self._process.wait()
            raise ChildCrashed(_how_it_ended(code))
        self._reader.feed(piece)

    def _drain_output(self) -> bool:
        """Keep the last of what the child printed; False when there can be no more."""
        while True:
            try:
                piece = os.read(self._output.fileno(), 65536)
            except BlockingIOError:
                return True
            if not piece:
                return False
            self._chatter += piece
            excess = len(self._chatter) - CHATTER_BYTES_MAX
            if excess > 0:
                del self._chatter[:excess]
                self._chatter_dropped += excess

    def _log_chatter(self) -> None:
        """Write what the child printed during a task to the log, bounded."""
        if not self._output.closed:
            self._drain_output()
        if self._chatter:
            _log.warning(
                "child_printed",
                kind=self.kind,
                pid=self.pid,
                text=self._chatter.decode("utf-8", "replace"),
                bytes_dropped=self._chatter_dropped,
            )
            self._chatter.clear()
            self._chatter_dropped = 0

    @staticmethod
    def _report(message: Mapping[str, object], on_progress: OnProgress | None) -> None:
        """Pass progress on; anything else is not from our child."""
        phase, numbers = message.get("progress"), message.get("numbers")
        if not isinstance(phase, str) or not isinstance(numbers, dict):
            raise ChildCrashed("sent a message that is no answer")
        if on_progress is not None:
            on_progress(phase, numbers)


def resident_bytes(pid: int) -> int:
    """Return the memory that a process really holds, or 0 where that cannot be known.

    The second of two limits: the child itself bounds its address space (``limit_memory`` in
    ``engine/child.py``), which is the first to notice, but does not exist on every system.
    """
    return _memory_of(pid, field=1)


def address_space_bytes(pid: int) -> int:
    """Return what a process has mapped, which its limit counts, or 0 where that is not known."""
    return _memory_of(pid, field=0)


def _memory_of(pid: int, *, field: int) -> int:
    """Return one field of what Linux says about the memory of a process."""
    if sys.platform != "linux":
        return 0
    try:
        fields = Path(f"/proc/{pid}/statm").read_text(encoding="ascii").split()
    except OSError:
        return 0  # It ended meanwhile; the socket will tell.
    return int(fields[field]) * os.sysconf("SC_PAGE_SIZE")


def _kill_group(pid: int) -> None:
    """Kill a child that was not reaped yet and everything in its session's group."""
    if sys.platform != "win32":
        try:
            os.killpg(pid, signal.SIGKILL)
        except (ProcessLookupError, PermissionError):
            # Nobody is left in it; macOS says "not permitted" for a group of zombies.
            return


def _how_it_ended(code: int) -> str:
    """Return in words how a process ended, from its return code."""
    if code < 0:
        return f"was ended by signal {-code} ({signal.strsignal(-code)})"
    return f"ended by itself with exit code {code}"
