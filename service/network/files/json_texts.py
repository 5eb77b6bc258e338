"""Many texts as codes into the few distinct ones, found by comparing 64-bit words.

A text is looked up by a hash of its words, and what is found there is compared word by word, so
that no chance enters; only a text that is not found in the table goes through a dictionary.
"""

from typing import Final

import numpy as np

from service.network.columns import BoolArray, CodeArray, IntArray
from service.network.files.json_blocks import LEAD, TEXT_BYTES_MAX, Block, WordArray

# Beyond, texts are as good as all different, and a dictionary of them would only cost.
DISTINCT_MAX: Final = 2**18

_SLOT_BITS: Final = 18
_MULTIPLIER: Final = np.uint64(0x9E3779B97F4A7C15)
_MIX: Final = np.uint64(29)
# The mask of a word of which so many bytes belong to the text.
_MASKS = np.array([(1 << 8 * size) - 1 for size in range(9)], dtype=np.uint64)


class TooManyDistinctError(Exception):
    """There are more distinct texts than a table is worth."""


class DistinctTexts:
    """The distinct texts met so far, in the order in which they were."""

    def __init__(self) -> None:
        """Begin with none."""
        self.texts: list[bytes] = []
        self._code: dict[bytes, int] = {}
        self._slots = np.full((2, 1 << _SLOT_BITS), -1, dtype=np.int32)
        # Of shape (words of the longest text, texts).
        self._words = np.zeros((0, 0), dtype=np.uint64)
        self._lengths: IntArray = np.zeros(0, dtype=np.int64)

    def codes(self, block: Block, *, starts: IntArray, ends: IntArray) -> CodeArray | None:
        """Return the code of each text of ``block``, None where one is too long.

        Raises ``TooManyDistinctError``.
        """
        lengths = ends - starts
        if len(lengths) == 0:
            return np.zeros(0, dtype=np.int32)
        longest = int(lengths.max())
        if longest > TEXT_BYTES_MAX:
            return None
        parts = words_of_texts(block.words, starts, lengths, longest)
        hashes = _hashes(parts, lengths)
        found = self._found(parts, lengths, hashes)
        missed = np.flatnonzero(found < 0)
        if len(missed):
            # Equal texts in a row, as in a sorted column, are looked up once.
            heads = _heads([part[missed] for part in parts], lengths[missed])
            rows = missed[heads]
            codes = self._learned(block, starts[rows], ends[rows])
            found[missed] = codes[np.cumsum(heads) - 1]
            self._index()
        return found

    def _found(self, parts: list[WordArray], lengths: IntArray, hashes: WordArray) -> CodeArray:
        """Return the code of each text that one of its two slots holds, else -1."""
        if len(self.texts) == 0:
            return np.full(len(lengths), -1, dtype=np.int32)
        found = self._at_slot(0, parts, lengths, hashes)
        missed = np.flatnonzero(found < 0)
        if len(missed):
            rest = [part[missed] for part in parts]
            found[missed] = self._at_slot(1, rest, lengths[missed], hashes[missed])
        return found

    def _at_slot(
        self, table: int, parts: list[WordArray], lengths: IntArray, hashes: WordArray
    ) -> CodeArray:
        """Return the code of each text that its slot of one table holds, else -1."""
        guess = self._slots[table][_slot(hashes, table)]
        same = (guess >= 0) & (self._lengths[guess] == lengths)
        # Texts of one length have the same number of words that are not beyond their end.
        for part, known in zip(parts, self._words, strict=False):
            same &= known[guess] == part
        return np.where(same, guess, np.int32(-1))

    def _learned(self, block: Block, starts: IntArray, ends: IntArray) -> CodeArray:
        """Look up texts one by one and return their codes, new ones for those that are new."""
        content = block.data.tobytes()
        codes = []
        for start, end in zip(starts.tolist(), ends.tolist(), strict=True):
            text = content[start:end]
            known = self._code.get(text)
            if known is None:
                known = self._code[text] = len(self.texts)
                self.texts.append(text)
                if known == DISTINCT_MAX:
                    raise TooManyDistinctError
            codes.append(known)
        return np.array(codes, dtype=np.int32)

    def _index(self) -> None:
        """Put texts that were learned into the table."""
        done = len(self._lengths)
        new = self.texts[done:]
        if not new:
            return
        lengths = np.array([len(text) for text in new], dtype=np.int64)
        starts = np.cumsum(lengths) - lengths + LEAD
        parts = words_of_texts(Block.of(b"".join(new)).words, starts, lengths, int(lengths.max()))
        hashes = _hashes(parts, lengths)
        grown = np.zeros((max(len(self._words), len(parts)), done + len(new)), dtype=np.uint64)
        grown[: len(self._words), :done] = self._words
        grown[: len(parts), done:] = parts
        self._words = grown
        self._lengths = np.concatenate((self._lengths, lengths))
        codes = np.arange(done, done + len(new), dtype=np.int32)
        for table, slots in enumerate(self._slots):
            places = _slot(hashes, table)
            free: BoolArray = slots[places] < 0
            slots[places[free]] = codes[free]


def words_of_texts(
    words: WordArray, starts: IntArray, lengths: IntArray, longest: int
) -> list[WordArray]:
    """Return the words of each text, zero where it has ended."""
    parts = []
    even = int(lengths.min()) == longest
    for first in range(0, max(longest, 1), 8):
        part = words[starts + first]
        if not even:
            part &= _MASKS[np.clip(lengths - first, 0, 8)]
        elif longest - first < 8:
            part &= _MASKS[longest - first]
        parts.append(part)
    return parts


def _heads(parts: list[WordArray], lengths: IntArray) -> BoolArray:
    """Return where a text differs from the one before it."""
    heads = np.ones(len(lengths), dtype=np.bool_)
    heads[1:] = lengths[1:] != lengths[:-1]
    for part in parts:
        heads[1:] |= part[1:] != part[:-1]
    return heads


def _hashes(parts: list[WordArray], lengths: IntArray) -> WordArray:
    """Return a number for each text, seldom the same for two."""
    hashes = lengths.astype(np.uint64)
    for part in parts:
        hashes = (hashes ^ part) * _MULTIPLIER
        hashes ^= hashes >> _MIX
    return hashes


def _slot(hashes: WordArray, table: int) -> IntArray:
    """Return the place of each hash in one of the two tables."""
    bits = np.uint64(64 - _SLOT_BITS * (table + 1))
    return ((hashes >> bits) & np.uint64((1 << _SLOT_BITS) - 1)).astype(np.int64)
