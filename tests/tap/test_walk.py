"""Finding records: many walks at once find what one walk finds."""

import struct

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from linkwatch.tap import walk
from linkwatch.tap.records import BLOCK_CHAIN, PCAP_CHAIN


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
    monkeypatch.setattr(walk, "WORTH_IT", 2)
    monkeypatch.setattr(walk, "PROBE", 200)


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
    piece = memoryview(bytes(piece[: len(piece) - cut]))
    places, end, corrupt = walk.records(piece, 0, order, PCAP_CHAIN)
    plain_places, plain_end, plain_corrupt = walk._one_walk(piece, 0, order, PCAP_CHAIN)
    assert places.tolist() == plain_places.tolist()
    assert (end, corrupt) == (plain_end, plain_corrupt)


def blocks_of(lengths, order, kinds):
    """Returns pcapng blocks, nearly all of them packets."""
    blocks = []
    for i, length in enumerate(lengths):
        size = 12 + (length + 3) // 4 * 4
        head, tail = (
            struct.pack(f"{order}II", kinds.get(i, 6), size),
            struct.pack(f"{order}I", size),
        )
        blocks.append(head + bytes([i % 7]) * (size - 12) + tail)
    return b"".join(blocks)


@pytest.mark.usefixtures("small")
@settings(max_examples=150)
@given(
    lengths=st.lists(st.integers(0, 900), min_size=60, max_size=160),
    order=st.sampled_from("<>"),
    kinds=st.dictionaries(st.integers(0, 160), st.integers(0, 7), max_size=5),
    damage=st.one_of(st.none(), st.tuples(st.integers(0, 10**6), st.integers(0, 255))),
)
def test_many_walks_find_the_blocks_that_one_walk_finds(lengths, order, kinds, damage):
    """Blocks of any kind are stepped over, and one of an impossible length ends both."""
    piece = bytearray(blocks_of(lengths, order, kinds))
    if damage:
        piece[damage[0] % len(piece)] = damage[1]
    many = walk.records(memoryview(piece), 0, order, BLOCK_CHAIN)
    with pytest.MonkeyPatch.context() as alone:
        alone.setattr(walk, "LEAST", len(piece) + 1)
        one = walk.records(memoryview(piece), 0, order, BLOCK_CHAIN)
    assert many[0].tolist() == one[0].tolist()
    assert many[1:] == one[1:]


@pytest.mark.parametrize("longer", [0, 1])
@pytest.mark.parametrize("behind", [0, 2 << 20])
def test_a_record_longer_than_any_frame_is_corrupt_wherever_a_piece_ends(longer, behind):
    """The longest frame is let pass and one octet more is refused, however much follows it."""
    length = PCAP_CHAIN.longest - PCAP_CHAIN.head + longer
    piece = piece_of([60] * 9 + [length], "<")
    piece += piece_of([200] * (behind // 216), "<")
    if not behind:
        piece = piece[:-1]
    places, end, corrupt = walk.records(memoryview(piece), 0, "<", PCAP_CHAIN)
    assert corrupt is bool(longer)
    if longer or not behind:
        assert (len(places), end) == (9, 9 * 76)
    else:
        assert end == len(piece)


@pytest.mark.parametrize("order", ["<", ">"])
def test_many_walks_do_nearly_all_the_work(order):
    """In a long piece of speech only the margin at its end is left to the one walk."""
    lengths = [74 + 20 * (i % 9) for i in range(14_000)]
    for piece, chain in (
        (piece_of(lengths, order, fill=None), PCAP_CHAIN),
        (blocks_of(lengths, order, {}), BLOCK_CHAIN),
    ):
        octets = np.frombuffer(piece, np.uint8)
        _, left = walk._many_walks(octets, 0, order, chain)
        assert len(piece) - left < 2 * walk.MARGIN


@pytest.mark.usefixtures("small")
def test_frames_that_hold_records_mislead_nobody():
    """A capture of captures: heads inside frames are guessed, and not believed."""
    inner = piece_of([60] * 10, "<")
    piece = b"".join(
        struct.pack("<IIII", 1_800_000_000, i, len(inner), len(inner)) + inner for i in range(40)
    )
    places, _, _ = walk.records(piece, 0, "<", PCAP_CHAIN)
    assert places.tolist() == [i * (16 + len(inner)) for i in range(40)]
