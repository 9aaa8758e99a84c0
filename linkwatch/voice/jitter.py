"""Interarrival jitter by RFC 3550 6.4.1 and A.8, for many streams at once.

J(i) = J(i-1) + (|D(i-1, i)| - J(i-1)) / 16 is a linear recurrence. With a = 15/16 it is the sum of
a**k * |D| / 16 over the packets k before, and sums of that form can be doubled in length at each
step: the sum over the last 2n packets is the sum over the last n, plus a**n times the same sum n
packets ago. After ten doublings the rest weighs a**1024 = 2e-29 and cannot be seen in a double.
"""

import numpy as np
import numpy.typing as npt

from linkwatch.frames import Longs

Reals = npt.NDArray[np.float64]

GAIN = 1 / 16  # RFC 3550 6.4.1
DECAY = 1 - GAIN
DOUBLINGS = 10


def jitter_after(difference: Reals, position: Longs, before: Reals) -> Reals:
    """Returns the jitter after each packet, in the unit of the differences.

    Columns of one length; the packets of a run stand together, in the order of their arrival.

    Args:
        difference: |D| between each packet and the one before it in its run.
        position: Each packet's position in its run, from 0.
        before: The jitter before each run, at its first packet (elsewhere not looked at).
    """
    jitter = difference * GAIN
    first = position == 0
    jitter[first] += DECAY * before[first]
    if not len(position):
        return jitter
    longest = int(position.max()) + 1
    for doubling in range(DOUBLINGS):
        reach = 1 << doubling
        if reach >= longest:
            break
        ago = np.where(position[reach:] >= reach, jitter[:-reach], 0.0)
        jitter[reach:] += DECAY**reach * ago
    return jitter
