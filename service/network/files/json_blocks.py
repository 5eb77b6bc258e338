"""Blocks of a text as bytes, and as the 64-bit words that begin at each byte."""

from typing import Final, NamedTuple

import numpy as np
from numpy.typing import NDArray

from service.network.columns import IntArray

ByteArray = NDArray[np.uint8]
WordArray = NDArray[np.uint64]

# Two words are read that end where a number ends: so much stands before the first byte of a block.
LEAD: Final = 16
# Longer texts are for the exact reader; an id has 64 characters, which UTF-8 may make longer.
TEXT_BYTES_MAX: Final = 64
# Words are read from a text's first byte on: so much stands behind the last byte of a block.
TAIL: Final = TEXT_BYTES_MAX + 8


class Block(NamedTuple):
    """Some bytes of a text with ``LEAD`` bytes before and ``TAIL`` behind, and their words.

    What belongs to the block begins at ``LEAD``.
    """

    data: ByteArray
    words: WordArray

    @classmethod
    def of(cls, text: bytes) -> "Block":
        """Return all of ``text`` as a block."""
        content = b"".join((bytes(LEAD), text, bytes(TAIL)))
        words: WordArray = np.ndarray(len(content) - 7, dtype="<u8", buffer=content, strides=(1,))
        return cls(np.frombuffer(content, dtype=np.uint8), words)

    def places(self, mark: int) -> IntArray:
        """Return where a byte occurs."""
        return np.flatnonzero(self.data[LEAD : len(self.data) - TAIL] == mark) + LEAD

    def holds(self, places: IntArray, expected: bytes) -> bool:
        """Return whether ``expected``, of at most ``TAIL`` bytes, stands at every one of places."""
        for first in range(0, len(expected), 8):
            part = expected[first : first + 8]
            mask = np.uint64((1 << 8 * len(part)) - 1)
            word = np.uint64(int.from_bytes(part, "little"))
            if bool(((self.words[places + first] & mask) != word).any()):
                return False
        return True
