"""Interarrival jitter: RFC 3550 6.4.1 and A.8."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from linkwatch.voice.jitter import jitter_after


def jitter_of(differences, before=0.0):
    """Returns the jitter after each packet of one run."""
    n = len(differences)
    carried = np.full(n, before)
    return jitter_after(np.array(differences, float), np.arange(n), carried)


# Computed from J += (|D| - J) / 16 with a constant |D|: J = d * (1 - (15/16)**n).
@pytest.mark.parametrize(
    ("difference", "packets", "jitter"),
    [(16, 1, 1), (16, 2, 31 / 16), (16, 3, 721 / 256), (160, 1, 10), (160, 16, 103.0281)],
)
def test_a_constant_difference_gives_the_exact_series(difference, packets, jitter):
    """The worked series of the recurrence come out."""
    assert jitter_of([difference] * packets)[-1] == pytest.approx(jitter, abs=5e-5)


runs = st.lists(st.lists(st.floats(0, 1e6), min_size=1, max_size=1500), min_size=1, max_size=4)


@given(runs=runs, before=st.floats(0, 1e6))
def test_many_runs_at_once_equal_one_packet_after_another(runs, before):
    """The doubling gives what the recurrence gives, for every packet of every run."""
    difference = np.concatenate([np.array(run) for run in runs])
    position = np.concatenate([np.arange(len(run)) for run in runs])
    jitter = jitter_after(difference, position, np.full(len(difference), before))
    plain = []
    for run in runs:
        now = before
        for d in run:
            now += (d - now) / 16
            plain.append(now)
    assert jitter == pytest.approx(np.array(plain), rel=1e-9, abs=1e-9)
