"""Many different texts as an array of bytes, each in as many 64-bit words as the longest needs."""

import numpy as np

from service.network.columns import IdArray, IntArray
from service.network.files.json_blocks import TEXT_BYTES_MAX, Block
from service.network.files.json_texts import words_of_texts
from service.network.scanned import ScannedIds

_SPACES = np.uint64(0x2020202020202020)
_ONES = np.uint64(0x0101010101010101)
_HIGH = np.uint64(0x8080808080808080)
_DELETES = np.uint64(0x7F7F7F7F7F7F7F7F)


class Ids:
    """The ids met so far, in order."""

    def __init__(self) -> None:
        """Begin with none."""
        self._parts: list[IdArray] = []
        self._ascii_only = True

    def add(self, block: Block, *, starts: IntArray, ends: IntArray) -> bool:
        """Take the ids of ``block`` from ``starts`` to ``ends``; return whether they are sound.

        They are not where one is empty or too long, has an ASCII control character, or is not
        UTF-8.
        """
        lengths = ends - starts
        if len(lengths) == 0:
            self._parts.append(np.zeros(0, dtype="S8"))
            return True
        longest = int(lengths.max())
        if longest > TEXT_BYTES_MAX or int(lengths.min()) < 1:
            return False
        words = np.stack(words_of_texts(block.words, starts, lengths, longest), axis=1)
        width = words.shape[1]
        # What stands behind the end of a text counts as a space.
        behind = np.arange(8 * width) >= lengths[:, None]
        filled = np.where(behind, np.uint8(ord(" ")), words.view(np.uint8)).view(np.uint64)
        deletes = filled ^ _DELETES
        odd = ((filled - _SPACES) & ~filled) | ((deletes - _ONES) & ~deletes)
        if bool((odd & _HIGH).any()):
            return False
        if bool((filled & _HIGH).any()):
            self._ascii_only = False
            try:
                # Between the ids stands nothing that could mend half a character.
                block.data[int(starts[0]) : int(ends[-1])].tobytes().decode()
            except UnicodeDecodeError:
                return False
        self._parts.append(words.view(f"S{8 * width}").ravel())
        return True

    def column(self, places: IntArray | None = None, rows: int = 0) -> ScannedIds:
        """Return the ids as a column; with ``places``, they stand there in so many rows."""
        ids: IdArray = np.concatenate(self._parts)
        longest = int(np.strings.str_len(ids).max(initial=1))
        ids = ids.astype(f"S{longest}")
        if places is not None:
            spread = np.zeros(rows, dtype=ids.dtype)
            spread[places] = ids
            ids = spread
        return ScannedIds(ids, ascii_only=self._ascii_only)
