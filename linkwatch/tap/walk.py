"""Finding where the records of a capture begin: each is known only from the one before it.

One walk takes one step of Python a record. So a long piece is walked from many places at once, in
step: where a walk begins is a guess (something that looks like a record's head), and a guess is
believed only when the walk before it, which is right, ends at that very place. What cannot be
proved is walked record by record.
"""

import struct
from typing import Any, NamedTuple, TypeAlias

import numpy as np
import numpy.typing as npt

from linkwatch.frames import Longs, Octets

Fields: TypeAlias = np.ndarray[tuple[int], np.dtype[Any]]


class Chain(NamedTuple):
    """How a format's records follow each other.

    Attributes:
        length_at: Where in a record's head its length stands, 32 bits.
        uncounted: Octets of a record that its length does not count.
        least, longest: Octets of the shortest and of the longest record that can be.
        multiple: What the octets of every record are a multiple of.
        head: Octets of a record's head.
        alike: The bits of a head's first 32 that nearly all records of a file have in common.
        common: The two octets of the first four, little-endian, that a guess looks for.
    """

    length_at: int
    uncounted: int
    least: int
    longest: int
    multiple: int
    head: int
    alike: int
    common: tuple[int, int]

    def allows(self, sizes: Longs) -> npt.NDArray[np.bool_]:
        """Returns whether records of so many octets can be."""
        fit = (sizes >= self.least) & (sizes <= self.longest)
        return fit if self.multiple == 1 else fit & (sizes % self.multiple == 0)


WALKS = 512
SEARCH = 512  # octets searched for a head; most records of voice are shorter
MARGIN = 64 << 10  # octets at the end of a piece that many walks leave to the one
LEAST = WALKS * SEARCH * 2  # octets below which one walk is as good
PROBE = (
    8 << 10
)  # octets that one walk tries first: many are too dear where the chain breaks at once
WORTH_IT = 32  # fewer walks in step are slower than one alone
CERTAIN = 3  # heads in a row that must look like heads
STEPS, MOST_STEPS = 8, 256  # taken before looking who has arrived; and taken at all


def records(piece: memoryview, place: int, order: str, chain: Chain) -> tuple[Longs, int, bool]:
    """Returns where the whole records of a piece begin from `place` on, and where they end.

    Args:
        piece: Octets of a file.
        place: Where a record begins in them.
        order: "<" or ">": the byte order of the heads.
        chain: How the records follow each other.

    Returns:
        Their places, the place after the last whole one, and whether what stands there cannot be
        a record.
    """
    found: list[Longs] = []
    if len(piece) - place >= LEAST:
        first, place, broken = _one_walk(piece[: place + PROBE], place, order, chain)
        found.append(first)
        if not broken:
            more, place = _many_walks(np.frombuffer(piece, np.uint8), place, order, chain)
            found.append(more)
    rest, place, corrupt = _one_walk(piece, place, order, chain)
    places = np.concatenate([*found, rest])
    wrong = np.flatnonzero(~chain.allows(np.diff(places, append=place)))
    if len(wrong):
        return places[: wrong[0]], int(places[wrong[0]]), True
    return places, place, corrupt


def _one_walk(piece: memoryview, place: int, order: str, chain: Chain) -> tuple[Longs, int, bool]:
    length_at = struct.Struct(f"{order}{chain.length_at}xI").unpack_from
    uncounted = chain.uncounted
    places: list[int] = []
    last, end = len(piece) - chain.head, len(piece)
    while place <= last:
        following = place + uncounted + length_at(piece, place)[0]
        if not place < following <= end:
            impossible = not chain.allows(np.array([following - place]))[0]
            return np.array(places, np.int64), place, impossible
        places.append(place)
        place = following
    return np.array(places, np.int64), place, False


def _many_walks(octets: Octets, place: int, order: str, chain: Chain) -> tuple[Longs, int]:
    """Returns the records that walks in step have proved, and the record at which these end."""
    lengths = _fields(octets, order, chain.length_at)
    begin = _guesses(octets, place, order, chain)
    if len(begin) < WORTH_IT:
        return begin[:0], place
    end = np.append(begin[1:], len(octets) - MARGIN)
    at, last = begin, len(lengths) - 1
    path = [at]
    while len(path) < MOST_STEPS and (at < end).any():
        for _ in range(STEPS):
            # A walk that goes astray stays at the last place where there is something to read.
            at = np.minimum(at + lengths[at] + chain.uncounted, last)
            path.append(at)
    walks = np.ascontiguousarray(np.array(path).T)
    inside = walks < end[:, np.newaxis]
    arrived = walks[np.arange(len(walks)), np.minimum(inside.sum(axis=1), walks.shape[1] - 1)]
    right = 1 + int(np.argmin(np.append(arrived[:-1] == begin[1:], False)))
    places = walks[:right][inside[:right]]
    # How long the last one is has not been proved: that is left to the one walk.
    return places[:-1], int(places[-1])


def _fields(octets: Octets, order: str, at: int = 0) -> Fields:
    """Returns the 32 bits that stand `at` octets behind each octet."""
    return np.ndarray((len(octets) - at - 3,), np.dtype(f"{order}u4"), octets, at, (1,))


def _guesses(octets: Octets, place: int, order: str, chain: Chain) -> Longs:
    """Returns places that look like records' heads, rising, the first of them right for certain.

    A head looks like one if it has in common with the first one what nearly all have, and if those
    that should follow have it as well.
    """
    heads, lengths = _fields(octets, order), _fields(octets, order, chain.length_at)
    one, other = chain.common if order == "<" else (3 - at for at in chain.common)
    spread = (len(octets) - place - MARGIN - SEARCH) // WALKS
    searched = np.ndarray((WALKS, SEARCH), np.uint8, octets, place + one, (spread, 1))
    hit = np.flatnonzero((searched == octets[place + one]).ravel())
    walk, within = np.divmod(hit, SEARCH)
    at = place + walk * spread + within
    likely = octets[at + other] == octets[place + other]
    walk, at = walk[likely], at[likely]
    wanted = heads[place] & chain.alike
    alike, following = heads[at] & chain.alike == wanted, at
    for _ in range(CERTAIN - 1):
        size = lengths[following] + np.int64(chain.uncounted)
        alike &= chain.allows(size) & (size <= MARGIN // CERTAIN)
        following = np.where(alike, following + size, at)
        alike &= heads[following] & chain.alike == wanted
    walk, at = walk[alike], at[alike]
    first = np.diff(walk, prepend=-1) > 0  # in each stretch that is searched
    return np.unique(np.append(place, at[first]))
