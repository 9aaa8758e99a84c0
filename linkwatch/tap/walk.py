"""Finding where the records of a pcap file begin: each is known only from the one before it.

One walk takes one step of Python a record. So a long piece is walked from many places at once, in
step: where a walk begins is a guess (something that looks like a record's head), and a guess is
believed only when the walk before it, which is right, ends at that very place. What cannot be
proved is walked record by record.
"""

import struct
from typing import Any

import numpy as np

from linkwatch.frames import Longs, Octets

HEAD = 16  # octets of a record's head: seconds, part of a second, captured, original
CAPTURED = 8
LONGEST_FRAME = 256 << 10  # octets; no link carries frames so long, so a longer one is corrupt
WALKS = 256
SEARCH = 1024  # octets searched for a head; frames of voice are far shorter
MARGIN = 64 << 10  # octets at the end of a piece that many walks leave to the one
LEAST = WALKS * SEARCH * 2  # octets below which one walk is as good
ALIKE = 3  # heads in a row that must look like heads


def records(piece: memoryview, place: int, order: str) -> tuple[Longs, int, bool]:
    """Returns where the whole records of a piece begin from `place` on, and where they end.

    Args:
        piece: Octets of a file.
        place: Where a record begins in them.
        order: "<" or ">": the byte order of the heads.

    Returns:
        Their places, the place after the last whole one, and whether what stands there cannot be
        a record.
    """
    found: list[Longs] = []
    if len(piece) - place >= LEAST:
        first, place = _many_walks(np.frombuffer(piece, np.uint8), place, order)
        found.append(first)
    rest, place, corrupt = _one_walk(piece, place, order)
    return np.concatenate([*found, rest]), place, corrupt


def _one_walk(piece: memoryview, place: int, order: str) -> tuple[Longs, int, bool]:
    captured_at = struct.Struct(f"{order}{CAPTURED}xI").unpack_from
    places: list[int] = []
    last, end = len(piece) - HEAD, len(piece)
    while place <= last:
        following = place + HEAD + captured_at(piece, place)[0]
        if following > end:
            return np.array(places, np.int64), place, following - place > LONGEST_FRAME
        places.append(place)
        place = following
    return np.array(places, np.int64), place, False


def _many_walks(octets: Octets, place: int, order: str) -> tuple[Longs, int]:
    """Returns the records that walks in step have found and proved, and where these end."""
    field = np.dtype(f"{order}u4")
    heads: np.ndarray[tuple[int], np.dtype[Any]] = np.ndarray(
        (len(octets) - 3,), field, octets, strides=(1,)
    )
    begin = _guesses(octets, heads, place, order)
    end = np.append(begin[1:], len(octets) - MARGIN)
    begin, end = begin[begin < end[-1]], end[begin < end[-1]]
    end = np.minimum(end, end[-1])
    walking, at, limit = np.arange(len(begin)), begin, end
    ended, steps = begin.copy(), []
    while len(walking):
        steps.append((walking, at))
        at = at + heads[at + CAPTURED] + HEAD
        beyond = at >= limit
        if beyond.any():
            ended[walking[beyond]] = at[beyond]
            walking, at, limit = walking[~beyond], at[~beyond], limit[~beyond]
    proved = int(np.argmin(np.append(ended[:-1] == begin[1:], False)))
    walks = np.concatenate([walk for walk, _ in steps])
    places = np.concatenate([found for _, found in steps])
    right = np.flatnonzero(walks < proved)
    in_order = right[np.argsort(walks[right].astype(np.uint16), kind="stable")]
    return places[in_order], int(begin[proved])


def _guesses(
    octets: Octets, heads: np.ndarray[tuple[int], np.dtype[Any]], place: int, order: str
) -> Longs:
    """Returns places that look like records' heads, rising, the first of them right for certain.

    A head looks like one if its seconds agree with the first one's in the upper half (18 hours),
    and if the two that should follow do as well.
    """
    spread = (len(octets) - place - MARGIN - SEARCH) // WALKS
    high, low = (3, 2) if order == "<" else (0, 1)
    searched = np.ndarray((WALKS, SEARCH), np.uint8, octets, place + high, (spread, 1))
    hit = np.flatnonzero((searched == octets[place + high]).ravel())
    walk = hit // SEARCH
    at = place + walk * spread + hit % SEARCH
    likely = octets[at + low] == octets[place + low]
    walk, at = walk[likely], at[likely]
    alike = np.ones(len(at), np.bool_)
    following = at.copy()
    seconds = heads[place] >> 16
    for _ in range(ALIKE - 1):
        captured = heads[following + CAPTURED].astype(np.int64)
        alike &= captured <= MARGIN // ALIKE - HEAD
        following = np.where(alike, following + HEAD + captured, following)
        alike &= heads[following] >> 16 == seconds
    at, walk = at[alike], walk[alike]
    _, first = np.unique(walk, return_index=True)
    return np.unique(np.append(place, at[first]))
