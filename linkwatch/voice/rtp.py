"""Telling RTP from what merely looks like it, as far as one packet alone can tell.

What only a run of packets can tell (numbers that advance, times that go with them) is decided in
`streams`, where a source is on probation until it has shown it.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from linkwatch.frames import FrameBatch, Longs, Octets, gather
from linkwatch.voice.headers import Datagrams, Mask, Words, chosen

# RFC 3550 5.1
RTP = np.dtype(
    [
        ("flags", "u1"),
        ("marker_type", "u1"),
        ("sequence", ">u2"),
        ("timestamp", ">u4"),
        ("ssrc", ">u4"),
    ]
)
# RFC 3550 5.3.1
EXTENSION = np.dtype([("profile", ">u2"), ("words", ">u2")])
# RFC 5761 4: with the marker bit these payload types (64 to 95) are RTCP's packet types.
RTCP_FIRST, RTCP_LAST = 192, 223


@dataclass(frozen=True, slots=True)
class RtpPackets:
    """Datagrams of a batch that may be RTP, in its order; columns of one length.

    Attributes:
        key: Source high and low, destination high and low, ports and SSRC: five words that name
            a source (see `Datagrams.ends`; the last is ports * 2**32 + SSRC). Empty where the
            packets have been chosen from others: whoever chooses knows their sources.
        payload_type: 0 to 127.
        sequence: 0 to 65535.
        timestamp: 0 to 2**32 - 1.
        payload_octets: Octets after the RTP header, padding included.
        time: When the frame was seen, nanoseconds since 1970-01-01 UTC.
        ip_octets, ip_header, dscp: As in `Datagrams`.
        frame_octets: Octets of the frame as it was on the tap.
    """

    key: tuple[Words, ...]
    payload_type: npt.NDArray[np.uint8]
    sequence: Longs
    timestamp: Longs
    payload_octets: Longs
    time: Longs
    ip_octets: Longs
    ip_header: Longs
    dscp: npt.NDArray[np.uint8]
    frame_octets: Longs

    def __len__(self) -> int:
        return len(self.time)

    def chosen(self, which: Longs | Mask) -> "RtpPackets":
        """Returns the packets with these indexes (in that order) or for which this is true."""
        return RtpPackets(
            (),
            self.payload_type[which],
            self.sequence[which],
            self.timestamp[which],
            self.payload_octets[which],
            self.time[which],
            self.ip_octets[which],
            self.ip_header[which],
            self.dscp[which],
            self.frame_octets[which],
        )


def possible_rtp(batch: FrameBatch, found: Datagrams) -> RtpPackets:
    """Returns the datagrams of a batch whose first octets could be an RTP header."""
    enough = found.captured >= RTP.itemsize
    if not enough.all():
        found = chosen(found, np.flatnonzero(enough))
    header = gather(batch.octets, found.at, RTP)
    octets = header_octets(batch.octets, found, header["flags"])
    marker_type = header["marker_type"]
    could_be = header["flags"] >> 6 == 2
    could_be &= (marker_type < RTCP_FIRST) | (marker_type > RTCP_LAST)
    could_be &= octets <= found.payload_octets
    if not could_be.all():
        which = np.flatnonzero(could_be)
        found, header, octets = chosen(found, which), header[which], octets[which]
    source = found.ports << np.uint64(32) | header["ssrc"]
    return RtpPackets(
        key=(*found.ends, source),
        payload_type=(header["marker_type"] & 0x7F).astype(np.uint8),
        sequence=header["sequence"].astype(np.int64),
        timestamp=header["timestamp"].astype(np.int64),
        payload_octets=found.payload_octets - octets,
        time=batch.times[found.frame],
        ip_octets=found.ip_octets,
        ip_header=found.ip_header,
        dscp=found.dscp,
        frame_octets=batch.original[found.frame],
    )


def header_octets(octets: Octets, found: Datagrams, flags: npt.NDArray[np.uint8]) -> Longs:
    """Returns the RTP header's octets with its CSRC list and extension (RFC 3550 5.1, 5.3.1).

    An extension whose own header was not captured counts as that header alone.
    """
    length = RTP.itemsize + (flags & 0x0F).astype(np.int64) * 4
    extended: Mask = flags & 0x10 != 0
    if extended.any():
        length[extended] += EXTENSION.itemsize
        read = np.flatnonzero(extended & (length <= found.captured))
        extension = gather(octets, found.at[read] + length[read] - EXTENSION.itemsize, EXTENSION)
        length[read] += extension["words"].astype(np.int64) * 4
    return length


# Different numbers in a row that must advance, the first included.
PROBATION_NUMBERS = 5
# "Timestamps that go with the numbers": at most 200 ms of a 100 kHz clock a packet (RFC 3551 4.2
# has receivers accept packets of 200 ms), or such a clock running through a silence.
MOST_TICKS_A_PACKET = 20_000
MOST_TICKS_A_SECOND = 100_000
TIMESTAMPS = 1 << 32


@dataclass(slots=True)
class Probation:
    """A source that has yet to show that it is RTP.

    Attributes:
        timestamp, time: Of the packet with the highest number so far; time in nanoseconds.
        numbers: Numbers in a row that advanced.
        moved: Whether timestamps have moved in these.
    """

    timestamp: int
    time: int
    numbers: int = 0
    moved: bool = False

    def passed(self, advance: int, timestamp: int, time: int) -> bool:
        """Takes a packet whose number advanced by this much; whether that was enough."""
        ticks = (timestamp - self.timestamp) % TIMESTAMPS
        silence = max(0, time - self.time) * MOST_TICKS_A_SECOND // 1_000_000_000
        self.timestamp, self.time = timestamp, time
        if ticks > advance * MOST_TICKS_A_PACKET + silence:
            self.fail()
        else:
            self.numbers += 1
            self.moved |= ticks > 0
        return self.numbers >= PROBATION_NUMBERS and self.moved

    def fail(self) -> None:
        """Begins again: a number jumped, or a timestamp did not go with it."""
        self.numbers, self.moved = 0, False
