"""How a body comes in: streamed to a file, counted and digested on the way, never parsed here.

To parse a large network would stop every other request of this process, so the path is handed to
a child. All limits are kept while the bytes arrive; nothing is believed that a header says.
"""

import hashlib
import shutil
import tempfile
import time
from collections.abc import AsyncIterator
from contextlib import asynccontextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO, Final

import anyio
from anyio.to_thread import run_sync
from starlette.requests import ClientDisconnect, Request

from service.doors.http import problem_kinds as kinds
from service.doors.http.problems import Problem

# Small enough to hold for each of the bodies that are under way, large enough that the hop into
# a thread, 0.1 ms, does not count.
PIECE_BYTES: Final = 1024 * 1024
IDLE_SECONDS_MAX: Final = 15.0
BODY_SECONDS_MAX: Final = 300.0
# What a process that was killed left behind; no body is under way for so long.
LEFTOVER_SECONDS: Final = 3600.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Spooled:
    """A body on disk: ``folder`` is the request's own, ``wire_digest`` that of the bytes sent."""

    path: Path
    folder: Path
    wire_digest: str


class Spool:
    """The folder in which bodies wait for their check."""

    def __init__(
        self,
        folder: Path,
        *,
        wire_bytes_max: int,
        idle_seconds_max: float = IDLE_SECONDS_MAX,
        body_seconds_max: float = BODY_SECONDS_MAX,
    ) -> None:
        """Keep bodies in ``folder``, each of at most ``wire_bytes_max``."""
        self._folder = folder
        self._wire_bytes_max = wire_bytes_max
        self._idle_seconds_max = idle_seconds_max
        self._body_seconds_max = body_seconds_max

    def prepare(self) -> None:
        """Create the folder, private to this user, and remove what a killed process left."""
        self._folder.mkdir(mode=0o700, parents=True, exist_ok=True)
        for entry in self._folder.iterdir():
            if time.time() - entry.stat().st_mtime > LEFTOVER_SECONDS:
                shutil.rmtree(entry, ignore_errors=True)

    @asynccontextmanager
    async def workspace(self) -> AsyncIterator[Path]:
        """Yield a fresh folder for one request; it is gone afterwards, whatever happens."""
        folder = Path(await run_sync(lambda: tempfile.mkdtemp(dir=self._folder)))
        try:
            yield folder
        finally:
            with anyio.CancelScope(shield=True):
                await run_sync(lambda: shutil.rmtree(folder, ignore_errors=True))

    async def receive(self, request: Request, folder: Path) -> Spooled:
        """Stream the body of ``request`` into ``folder``.

        Raises the problems 413 when it is larger than allowed, by its own word or by count, and
        408 when it does not arrive in time.
        """
        self.refuse_declared_size(request)
        path = folder / "body"
        digest = hashlib.sha256()
        count = 0
        piece = bytearray()
        with await run_sync(lambda: path.open("xb")) as file:
            async for chunk in self._chunks(request):
                count += len(chunk)
                if count > self._wire_bytes_max:
                    raise self._too_large()
                piece += chunk
                if len(piece) >= PIECE_BYTES:
                    await run_sync(_write, file, digest, bytes(piece))
                    piece.clear()
            await run_sync(_write, file, digest, bytes(piece))
        return Spooled(
            path=path,
            folder=folder,
            wire_digest=f"sha-256:{digest.hexdigest()}",
        )

    def refuse_declared_size(self, request: Request) -> None:
        """Refuse a body that says itself that it is too large, before any of it is read."""
        declared = request.headers.get("content-length", "0")
        if declared.isascii() and declared.isdigit() and int(declared) > self._wire_bytes_max:
            raise self._too_large()

    async def _chunks(self, request: Request) -> AsyncIterator[bytes]:
        """Yield the body as it arrives, within the limits of time."""
        until = anyio.current_time() + self._body_seconds_max
        stream = request.stream()
        while True:
            seconds = min(self._idle_seconds_max, until - anyio.current_time())
            chunk = None
            with anyio.move_on_after(max(seconds, 0)):
                try:
                    chunk = await anext(stream)
                except StopAsyncIteration:
                    return
                except ClientDisconnect as error:
                    # Nobody is left to read the answer; it still has to be one of ours.
                    raise Problem(kinds.UNREADABLE_REQUEST, "The body was cut off.") from error
            if chunk is None:
                raise Problem(
                    kinds.BODY_TOO_SLOW,
                    f"It may pause {self._idle_seconds_max:g} s and take "
                    f"{self._body_seconds_max:g} s.",
                    headers={"Connection": "close"},
                )
            yield chunk

    def _too_large(self) -> Problem:
        """Return the problem; the connection cannot be used for another request after it."""
        return Problem(
            kinds.BODY_TOO_LARGE,
            f"It may be {self._wire_bytes_max} bytes on the wire.",
            headers={"Connection": "close"},
            members={"wire_bytes_max": self._wire_bytes_max},
        )


def _write(file: BinaryIO, digest: "hashlib._Hash", piece: bytes) -> None:
    """Write and digest one piece, off the event loop: both let other threads run meanwhile."""
    file.write(piece)
    digest.update(piece)
