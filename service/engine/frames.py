"""Small messages between a supervisor and its child: JSON, each after its length.

A length in front tells a whole message from a torn one, so that a child that dies while it writes
can never be taken for one that answered. Networks and plans never pass here, only their paths.
"""

import socket
from collections.abc import Mapping

import orjson

HEADER_BYTES = 4
# A hundred faults of two hundred characters are 0.1 MiB; what claims to be longer than this is
# not from our own child's code but from memory that was overwritten.
FRAME_BYTES_MAX = 16 * 2**20


class FrameBroken(Exception):  # noqa: N818 - named for the fact, like every error of this house
    """What arrived is not a frame."""


def framed(message: Mapping[str, object]) -> bytes:
    """Return ``message`` as it travels: four bytes of length, most significant first, then JSON."""
    content = orjson.dumps(message)
    if len(content) > FRAME_BYTES_MAX:
        raise ValueError(f"a message of {len(content)} bytes does not fit into a frame")
    return len(content).to_bytes(HEADER_BYTES, "big") + content


class FrameReader:
    """Puts messages together again from the pieces in which they arrive."""

    def __init__(self) -> None:
        """Begin with nothing received."""
        self._received = bytearray()

    def feed(self, piece: bytes) -> None:
        """Take in what the socket gave."""
        self._received += piece

    def message(self) -> dict[str, object] | None:
        """Return the next whole message, or None while it is still incomplete.

        Raises ``FrameBroken`` when the bytes cannot become one.
        """
        if len(self._received) < HEADER_BYTES:
            return None
        length = int.from_bytes(self._received[:HEADER_BYTES], "big")
        if length > FRAME_BYTES_MAX:
            raise FrameBroken(f"a frame claims {length} bytes")
        end = HEADER_BYTES + length
        if len(self._received) < end:
            return None
        content = bytes(self._received[HEADER_BYTES:end])
        del self._received[:end]
        try:
            message = orjson.loads(content)
        except orjson.JSONDecodeError as error:
            raise FrameBroken("a frame is not JSON") from error
        if not isinstance(message, dict):
            raise FrameBroken("a frame is not a JSON object")
        return message


class Channel:
    """The child's end: blocking, because a child has nothing else to do."""

    def __init__(self, connection: socket.socket) -> None:
        """Speak over ``connection``."""
        self._connection = connection
        self._reader = FrameReader()

    def send(self, message: Mapping[str, object]) -> None:
        """Send ``message`` whole."""
        self._connection.sendall(framed(message))

    def receive(self) -> dict[str, object] | None:
        """Wait for the next message; None when the other end has closed."""
        while (message := self._reader.message()) is None:
            piece = self._connection.recv(65536)
            if not piece:
                return None
            self._reader.feed(piece)
        return message
