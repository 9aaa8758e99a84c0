"""A live port on other systems, through scapy's listening socket: raw octets, nothing decoded.

The kernel hands over whole frames here, so each is cut to its headers at once and the rest is
dropped. How many frames the system itself dropped is not known.
"""

import time
from collections.abc import Iterator

import numpy as np

from linkwatch.errors import TapError
from linkwatch.frames import CounterReading, FrameBatch, LinkType, TapStatistics, silence
from linkwatch.tap.counters import InterfaceCounters

KEPT_OCTETS = 96  # of a frame: link, IPv6, UDP and RTP headers with two tags
HAND_OVER_S = 0.25
MOST_FRAMES = 4096


class ListeningSocket:
    """A live port as a tap, wherever scapy can listen.

    Args:
        name: The port.

    Raises:
        PermissionError: Packets may not be read.
        TapError: The port cannot be listened on.
    """

    def __init__(self, name: str) -> None:
        import scapy.arch  # noqa: F401 - tells scapy which sockets this system has
        from scapy.config import conf
        from scapy.error import Scapy_Exception

        self._name = name
        self._counters = InterfaceCounters(name)
        self._closed = False
        self._frames = self._octets = 0
        self._remarks = ["frames that the system drops before they are read are not known here"]
        try:
            self._socket = conf.L2listen(iface=name, filter="udp or (vlan and udp)")
        except (Scapy_Exception, ValueError) as error:
            raise _meant(name, error) from None

    @property
    def name(self) -> str:
        """The port's name."""
        return self._name

    def batches(self) -> Iterator[FrameBatch]:
        """Yields what has come in, a few times a second."""
        try:
            while not self._closed:
                yield self._gathered(time.monotonic() + HAND_OVER_S)
        finally:
            self._socket.close()

    def _gathered(self, until: float) -> FrameBatch:
        """Returns the frames of a short while as one batch."""
        kept: list[bytes] = []
        lengths: list[int] = []
        times: list[int] = []
        while (left := until - time.monotonic()) > 0 and len(kept) < MOST_FRAMES:
            if not self._socket.select([self._socket], left):
                continue
            _, octets, seen = self._socket.recv_raw()
            if octets:
                kept.append(octets[:KEPT_OCTETS])
                lengths.append(len(octets))
                times.append(round(seen * 1e9) if seen else time.time_ns())
        now = time.time_ns()
        if not kept:
            return silence(LinkType.ETHERNET, now)
        self._frames += len(kept)
        self._octets += sum(lengths)
        captured = np.array([len(octets) for octets in kept], np.int64)
        return FrameBatch(
            np.frombuffer(b"".join(kept), np.uint8),
            np.cumsum(captured) - captured,
            captured,
            np.array(lengths, np.int64),
            np.array(times, np.int64),
            LinkType.ETHERNET,
            now,
        )

    def counters(self) -> CounterReading:
        """Returns the port's counters now."""
        return self._counters.read(time.time_ns())

    def statistics(self) -> TapStatistics:
        """Returns how well the port was heard so far."""
        return TapStatistics(self._frames, self._octets, remarks=tuple(self._remarks))

    def remark(self, text: str) -> None:
        """Adds what a reader of the figures must know."""
        self._remarks.append(text)

    def close(self) -> None:
        """Ends `batches` within a moment."""
        self._closed = True


def _meant(name: str, error: Exception) -> Exception:
    """Returns what scapy's error means to us."""
    if "permission" in str(error).lower():
        return PermissionError(str(error))
    return TapError(name, got=str(error))
