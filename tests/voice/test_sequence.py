"""Sequence numbers, one source at a time: RFC 3550 A.1 and A.3, and docs/figures.md."""

import numpy as np
import pytest
import rfc3550
from hypothesis import given
from hypothesis import strategies as st

from linkwatch.voice.sequence import COPY, LATE, MEMORY, STRAY, Numbering


def numbering_after(*sequences):
    numbering = Numbering.beginning_with(sequences[0], np.zeros(MEMORY, np.int64))
    verdicts = [numbering.take(sequence) for sequence in sequences]
    return numbering, verdicts


# RFC 3550 A.1: the source is valid and max_seq is 1000.
@pytest.mark.parametrize(
    ("sequence", "verdict"),
    [
        (1001, 1),
        (3999, 2999),  # 2999 ahead: the last that counts as dropped packets between
        (4000, STRAY),  # 3000 ahead: a jump
        (1000, COPY),
        (999, LATE),
        (901, LATE),  # 99 behind
        (900, STRAY),  # exactly 100 behind is not accepted
    ],
)
def test_windows_are_those_of_a1(sequence, verdict):
    """A number is new, late, a copy or a jump within the very limits of A.1."""
    _, verdicts = numbering_after(1000, sequence)
    assert verdicts[-1] == verdict


def test_numbers_go_on_across_the_wrap():
    """65535 is followed by 0, one further on."""
    numbering, verdicts = numbering_after(65534, 65535, 0, 1)
    assert verdicts == [1] * 4
    assert (numbering.expected, numbering.lost) == (4, 0)


# RFC 3550 A.3, computed: expected = extended highest - base + 1, lost = expected - received.
@pytest.mark.parametrize(
    ("first", "last", "missing", "expected", "lost"),
    [(100, 199, 5, 100, 5), (65500, 99, 0, 136, 0), (1, 250, 1, 250, 1)],
)
def test_loss_is_what_was_expected_less_what_came(first, last, missing, expected, lost):
    """Loss follows A.3's examples where nothing came twice."""
    span = (last - first) % 65536 + 1
    sequences = [(first + i) % 65536 for i in range(span)]
    numbering, _ = numbering_after(*sequences[:2], *sequences[2 + missing :])
    assert (numbering.expected, numbering.lost, numbering.lost_a3) == (expected, lost, lost)


def test_copies_never_hide_loss():
    """A.3's own figure can go negative; ours stays with the packets that are missing."""
    numbering, _ = numbering_after(1, 2, 2, 2, 4, 4)
    assert numbering.lost == 1
    assert numbering.lost_a3 == 4 - 6
    assert numbering.copies == 3


def test_a_jump_counts_only_when_a_second_packet_confirms_it():
    """One stray packet is left out; two in a row begin a segment that holds them both."""
    numbering, _ = numbering_after(10, 11, 30_000, 12)
    assert (numbering.strays, numbering.expected, numbering.lost) == (1, 3, 0)
    numbering, _ = numbering_after(10, 11, 30_000, 30_001, 30_003)
    assert (numbering.strays, numbering.segment) == (0, 1)
    assert (numbering.expected, numbering.lost) == (2 + 4, 1)


network = st.lists(
    st.one_of(
        st.integers(1, 5),  # goes on, perhaps with loss
        st.integers(-4, 0),  # late or a copy
        st.sampled_from([-120, -100, -99, 2999, 3000, 3001, 30_000]),
    ),
    max_size=60,
)


@given(first=st.integers(0, 65535), steps=network)
def test_it_counts_as_a_plain_rendering_of_the_rfc_counts(first, steps):
    """Whatever happens to the numbers, every count is that of the reference."""
    sequences = [first]
    for step in steps:
        sequences.append((sequences[-1] + step) % 65536)
    numbering, _ = numbering_after(*sequences)
    reference = rfc3550.Source(first)
    for sequence in sequences:
        reference.update_seq(sequence)
    assert numbering.expected == reference.expected
    assert numbering.lost == reference.lost
    assert numbering.lost_a3 == reference.lost_a3
    assert numbering.copies == reference.duplicates
    assert numbering.late == reference.reordered
    assert numbering.strays == reference.strays
