"""Finding records: many walks at once find what one walk finds."""

import struct

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from linkwatch.tap import walk


def piece_of(lengths, order, seconds=1_800_000_000, fill=0):
    rng = np.random.default_rng(len(lengths))
    records = []
    for i, length in enumerate(lengths):
        frame = rng.bytes(length) if fill is None else bytes([fill]) * length
        records.append(struct.pack(f"{order}IIII", seconds + i // 50, i, length, length) + frame)
    return b"".join(records)


@pytest.fixture
def small(monkeypatch):
    """Makes many walks worth while in a small piece."""
    monkeypatch.setattr(walk, "WALKS", 8)
    monkeypatch.setattr(walk, "SEARCH", 300)
    monkeypatch.setattr(walk, "MARGIN", 3000)
    monkeypatch.setattr(walk, "LEAST", 12_000)


@pytest.mark.usefixtures("small")
@settings(max_examples=150)
@given(
    lengths=st.lists(st.integers(0, 900), min_size=60, max_size=160),
    order=st.sampled_from("<>"),
    fill=st.sampled_from([None, 0, 0x6B]),
    cut=st.integers(0, 40),
    damage=st.one_of(st.none(), st.tuples(st.integers(0, 10**6), st.integers(0, 255))),
)
def test_many_walks_find_what_one_walk_finds(lengths, order, fill, cut, damage):
    """However long the frames, whatever is in them, and wherever a piece is cut or damaged."""
    piece = bytearray(piece_of(lengths, order, fill=fill))
    if damage:
        piece[damage[0] % len(piece)] = damage[1]
    piece = bytes(piece[: len(piece) - cut])
    places, end, corrupt = walk.records(piece, 0, order)
    plain_places, plain_end, plain_corrupt = walk._one_walk(piece, 0, order)
    assert places.tolist() == plain_places.tolist()
    assert (end, corrupt) == (plain_end, plain_corrupt)


@pytest.mark.usefixtures("small")
def test_frames_that_hold_records_mislead_nobody():
    """A capture of captures: heads inside frames are guessed, and not believed."""
    inner = piece_of([60] * 10, "<")
    piece = b"".join(
        struct.pack("<IIII", 1_800_000_000, i, len(inner), len(inner)) + inner for i in range(40)
    )
    places, _, _ = walk.records(piece, 0, "<")
    assert places.tolist() == [i * (16 + len(inner)) for i in range(40)]
