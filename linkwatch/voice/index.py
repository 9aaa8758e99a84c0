"""Finding rows by their keys, a whole column of keys at a time.

An open-addressing table with linear probing: place = hash of the key; a place taken by another
key sends the search one place on. Keys are compared whole, so two keys never share a row.
"""

from typing import TypeAlias

import numpy as np
import numpy.typing as npt

from linkwatch.frames import Longs
from linkwatch.voice.headers import Mask, Words

Key: TypeAlias = tuple[Words, ...]

EMPTY = -1
# Odd multipliers with well-spread bits (fractional parts of square roots), one for each word.
MULTIPLIERS = (
    0x9E3779B97F4A7C15,
    0xBB67AE8584CAA73B,
    0x3C6EF372FE94F82B,
    0xA54FF53A5F1D36F1,
    0x510E527FADE682D1,
)
PLACES_PER_ROW = 4  # keeps the searches short: at most a quarter of the places is taken


class KeyIndex:
    """Rows found by keys of five 64-bit words.

    Args:
        rows: How many rows there may be.
    """

    def __init__(self, rows: int) -> None:
        places = 1 << (rows * PLACES_PER_ROW - 1).bit_length()
        self._last = places - 1
        self._rows = np.full(places, EMPTY, np.int32)
        self._keys: tuple[Words, ...] = tuple(np.zeros(rows, np.uint64) for _ in MULTIPLIERS)

    def find(self, key: Key) -> npt.NDArray[np.int32]:
        """Returns the row of each key, or -1 where it has none."""
        place = self._place(key)
        row = self._rows[place]
        looking = np.flatnonzero((row != EMPTY) & ~self._is(row, key))
        while len(looking):
            place[looking] = place[looking] + 1 & self._last
            there = self._rows[place[looking]]
            row[looking] = there
            wrong = (there != EMPTY) & ~self._is(there, tuple(word[looking] for word in key))
            looking = looking[wrong]
        return row

    def add(self, rows: Longs, key: Key) -> None:
        """Enters these rows under these keys; the keys must be new and differ from one another."""
        for column, word in zip(self._keys, key, strict=True):
            column[rows] = word
        self._enter(rows)

    def keep(self, rows: Longs) -> None:
        """Forgets every row but these."""
        self._rows.fill(EMPTY)
        self._enter(rows)

    def key(self, row: int) -> tuple[int, ...]:
        """Returns the five words of a row's key."""
        return tuple(int(column[row]) for column in self._keys)

    def _enter(self, rows: Longs) -> None:
        place = self._place(tuple(column[rows] for column in self._keys))
        while len(rows):
            free = self._rows[place] == EMPTY
            self._rows[place[free]] = rows[free]
            # Where several wanted one place, one has it now; the others go one place on.
            without = self._rows[place] != rows
            rows, place = rows[without], place[without] + 1 & self._last

    @staticmethod
    def mixed(key: Key) -> Words:
        """Returns a hash of each key."""
        mixed = key[0] * np.uint64(MULTIPLIERS[0])
        for word, multiplier in zip(key[1:], MULTIPLIERS[1:], strict=True):
            mixed = (mixed ^ mixed >> np.uint64(29)) + word * np.uint64(multiplier)
        return mixed ^ mixed >> np.uint64(32)

    def _place(self, key: Key) -> Longs:
        return (self.mixed(key) & np.uint64(self._last)).astype(np.int64)

    def _is(self, row: npt.NDArray[np.int32], key: Key) -> Mask:
        """Whether each row has this key; a row of -1 gives an answer that means nothing."""
        same: Mask = self._keys[-1][row] == key[-1]
        for column, word in zip(self._keys[:-1], key[:-1], strict=True):
            same &= column[row] == word
        return same
