"""Interface counters: all traffic of a port, which needs no right to read packets.

The operating system's counters may wrap (at 32 or 64 bits), begin again (a driver reloaded, a port
unplugged and plugged in), or vanish with the port. `InterfaceCounters` takes all that out: what it
returns only grows.
"""

import threading
import time
from collections.abc import Callable, Iterator
from typing import NamedTuple

from linkwatch.frames import CounterReading, FrameBatch, LinkType, TapStatistics, silence

WRAP_32, WRAP_64 = 1 << 32, 1 << 64
# A counter that went back by nearly its whole range has wrapped; by less, it began again.
WRAP_SHARE = 0.5
LOOK_S = 0.5


class RawCounters(NamedTuple):
    """What the operating system says of a port.

    Attributes:
        received, sent: Octets, as they count now.
        up: Whether the port is up.
        speed_kbps: Its speed, 0 where it is not told.
    """

    received: int
    sent: int
    up: bool
    speed_kbps: int


def read_system(name: str) -> RawCounters | None:
    """Returns the operating system's counters of a port, None where there is no such port."""
    import psutil

    octets = psutil.net_io_counters(pernic=True, nowrap=False).get(name)
    state = psutil.net_if_stats().get(name)
    if octets is None or state is None:
        return None
    speed_kbps = state.speed * 1000 if state.speed > 0 else 0
    return RawCounters(octets.bytes_recv, octets.bytes_sent, state.isup, speed_kbps)


class InterfaceCounters:
    """The counters of a port, growing for ever.

    Args:
        name: The port.
        read: Returns what the operating system says of it.
    """

    def __init__(self, name: str, read: Callable[[str], RawCounters | None] = read_system) -> None:
        self._name = name
        self._read = read
        self._last: RawCounters | None = None
        self._received = self._sent = 0

    def read(self, now: int) -> CounterReading:
        """Returns the counters at `now` (nanoseconds); of a port that is gone, its last ones."""
        raw = self._read(self._name)
        if raw is None:
            speed_kbps = self._last.speed_kbps if self._last else 0
            return CounterReading(now, self._received, self._sent, False, speed_kbps)
        if self._last:
            self._received += grown(self._last.received, raw.received)
            self._sent += grown(self._last.sent, raw.sent)
        self._last = raw
        return CounterReading(now, self._received, self._sent, raw.up, raw.speed_kbps)


def grown(before: int, now: int) -> int:
    """Returns by how many octets a counter has grown, whatever happened to it.

    One that went back a long way from near the end of its range has wrapped. Any other that went
    back began again at nothing, and has counted what it shows since.
    """
    if now >= before:
        return now - before
    for range_ in (WRAP_32, WRAP_64):
        if before < range_ and before - now > range_ * WRAP_SHARE:
            return now + range_ - before
    return now


class CountersOnly:
    """A port of which only the counters may be read: a tap without frames.

    Args:
        name: The port.
        remarks: Why, and what the remedy is.
    """

    def __init__(self, name: str, remarks: tuple[str, ...] = ()) -> None:
        self._name = name
        self._remarks = remarks
        self._counters = InterfaceCounters(name)
        self._closed = threading.Event()

    @property
    def name(self) -> str:
        """The port's name."""
        return self._name

    def batches(self) -> Iterator[FrameBatch]:
        """Yields silences, as time passes."""
        while not self._closed.is_set():
            yield silence(LinkType.ETHERNET, time.time_ns())
            self._closed.wait(LOOK_S)

    def counters(self) -> CounterReading:
        """Returns the port's counters now."""
        return self._counters.read(time.time_ns())

    def statistics(self) -> TapStatistics:
        """Returns that nothing was heard, and why."""
        return TapStatistics(remarks=self._remarks)

    def close(self) -> None:
        """Ends `batches`."""
        self._closed.set()
