"""What every tap delivers: a batch of frames as columns, never an object per frame.

Headers are numpy layouts; `gather` reads a whole column of them at once.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from enum import IntEnum
from typing import Any, Protocol, TypeAlias

import numpy as np
import numpy.typing as npt

Octets: TypeAlias = npt.NDArray[np.uint8]
Longs: TypeAlias = npt.NDArray[np.int64]
Rows: TypeAlias = npt.NDArray[Any]


class LinkType(IntEnum):
    """What a frame begins with; the numbers are the published LINKTYPE values."""

    NULL = 0
    ETHERNET = 1
    RAW = 101
    LOOP = 108
    LINUX_SLL = 113
    IPV4 = 228
    IPV6 = 229
    LINUX_SLL2 = 276


@dataclass(frozen=True, slots=True)
class FrameBatch:
    """Frames in the order they were read.

    Columns of one length n. A frame's octets are `octets[offsets[i] : offsets[i] + captured[i]]`.
    The buffer may be memory of the kernel or of a file: it is valid only until the tap is asked
    for its next batch, so whoever keeps something of it copies that.

    Attributes:
        octets: The buffer the frames lie in.
        offsets: Where each frame begins in it.
        captured: Octets of each frame that are in the buffer.
        original: Octets of each frame as it was on the tap, with tags that the kernel took off.
        times: When each frame was seen, nanoseconds since 1970-01-01 UTC.
        link_type: What the frames begin with.
        until: The tap has delivered every frame before this time, nanoseconds since 1970-01-01
            UTC. A live tap moves it on in batches without frames; that is how time passes on a
            silent link.
    """

    octets: Octets
    offsets: Longs
    captured: Longs
    original: Longs
    times: Longs
    link_type: LinkType
    until: int

    def __len__(self) -> int:
        return len(self.offsets)

    def part(self, start: int, stop: int, until: int) -> "FrameBatch":
        """Returns the frames from `start` to before `stop`, with `until` in nanoseconds."""
        piece = slice(start, stop)
        return replace(
            self,
            offsets=self.offsets[piece],
            captured=self.captured[piece],
            original=self.original[piece],
            times=self.times[piece],
            until=until,
        )


def silence(link_type: LinkType, until: int) -> FrameBatch:
    """Returns a batch without frames: it says only that time has come to `until`."""
    none = np.empty(0, np.int64)
    return FrameBatch(np.empty(0, np.uint8), none, none, none, none, link_type, until)


def gather(octets: Octets, at: Longs, layout: np.dtype[Any]) -> Rows:
    """Returns the layout's octets at each place, as rows of that layout.

    Every place must have the whole layout in the buffer. Overlapping views of the buffer make
    this one copy of a few octets per row, whatever their alignment.
    """
    size = layout.itemsize
    if len(octets) < size or not len(at):
        return np.empty(0, layout)
    places = np.ndarray((len(octets) - size + 1,), f"V{size}", octets, strides=(1,))
    return places[at].view(layout)


@dataclass(frozen=True, slots=True)
class TapStatistics:
    """How well a tap hears.

    Attributes:
        frames: Frames delivered.
        octets: Their octets as they were on the tap.
        dropped: Frames the kernel had to drop before they were delivered.
        oversize: Frames above the port's MTU: an offload has merged packets, so octets per packet
            are false.
        remarks: What a reader of the figures must know, a sentence each.
    """

    frames: int = 0
    octets: int = 0
    dropped: int = 0
    oversize: int = 0
    remarks: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class CounterReading:
    """An interface's octet counters since some fixed moment.

    They grow for ever: wraps and resets have been taken out.

    Attributes:
        time: When they were read, nanoseconds since 1970-01-01 UTC.
        received: Octets received.
        sent: Octets sent.
        up: Whether the interface is there and up.
        speed_kbps: Its speed in kbit/s, 0 where the system does not say.
    """

    time: int
    received: int
    sent: int
    up: bool = True
    speed_kbps: int = 0


class Tap(Protocol):
    """Where frames come from: a live port, a capture file or the built-in scene."""

    @property
    def name(self) -> str:
        """What a person calls it: the port's or the file's name."""
        ...

    def batches(self) -> Iterator[FrameBatch]:
        """Yields batches until the source ends or `close` is called.

        A live tap yields at least twice a second, if need be without frames.
        """
        ...

    def counters(self) -> CounterReading | None:
        """Returns the interface counters now, or None for a source that has none."""
        ...

    def statistics(self) -> TapStatistics:
        """Returns how well the tap hears, up to now."""
        ...

    def close(self) -> None:
        """Ends `batches` and frees what the tap holds.

        May be called from another thread, and twice.
        """
        ...
