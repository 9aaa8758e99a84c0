"""A live port on Linux, through a ring of memory that the kernel fills and we read in place.

The layouts are those of the kernel's packet(7) and linux/if_packet.h, version 3 of the ring: the
kernel fills blocks, and hands one over when it is full or has waited long enough. We walk it, hand
it on as one batch, and give it back.
"""

import contextlib
import errno
import fcntl
import mmap
import select
import socket
import struct
import time
from collections.abc import Iterator
from typing import NamedTuple

import numpy as np

from linkwatch.errors import TapError
from linkwatch.frames import (
    CounterReading,
    FrameBatch,
    LinkType,
    Longs,
    TapStatistics,
    gather,
    silence,
)
from linkwatch.tap.counters import InterfaceCounters
from linkwatch.tap.gate import close_gate, headers_only

SOL_PACKET = 263
ADD_MEMBERSHIP, RX_RING, STATISTICS, VERSION, IGNORE_OUTGOING = 1, 5, 6, 10, 23
VERSION_3, PROMISCUOUS, EVERY_PROTOCOL = 2, 1, 3
STATUS, PACKETS, FIRST = 8 // 4, 12 // 4, 16 // 4  # words of a block's head
OURS, KERNELS = 1, 0
PACKET = np.dtype(
    {
        "names": ["sec", "nsec", "captured", "original", "status", "mac"],
        "formats": ["u4", "u4", "u4", "u4", "u4", "u2"],
        "offsets": [4, 8, 12, 16, 20, 24],
        "itemsize": 48,
    }
)
VLAN_VALID = 1 << 4
VLAN_TAG = 4

BLOCKS, BLOCK_OCTETS, FRAME_OCTETS = 32, 1 << 20, 2048
HAND_OVER_MS = 50
# A block that is not handed over yet may hold frames so old.
NOT_YET_NS = 3 * HAND_OVER_MS * 1_000_000
WAIT_MS = 200

GET_HARDWARE, GET_MTU = 0x8927, 0x8921
# Kinds of hardware, as linux/if_arp.h numbers them.
LOOPBACK = 772
ETHERNETS = (1, LOOPBACK)
RAW_IP = (519, 65534)
# PPP, and IP in IP, in IPv6 and in GRE: their own headers vary, so the kernel hands over from the
# IP packet on.
TUNNELS = (512, 768, 769, 776, 778, 823)
ROOM_FOR_HEADER = 14 + 2 * VLAN_TAG


class PacketRing:
    """A live port as a tap.

    Args:
        name: The port.

    Raises:
        PermissionError: Packets may not be read.
        TapError: There is no such port, or its frames cannot be read.
    """

    def __init__(self, name: str) -> None:
        self._name = name
        self._counters = InterfaceCounters(name)
        self._frames = self._octets = self._dropped = self._oversize = 0
        self._remarks: dict[str, None] = {}  # in order, each once
        self._closed = self._reading = False
        self._until = 0
        # The first reading is where counting begins; it also loads what reading takes, while
        # root may still be needed to load it.
        self._counters.read(time.time_ns())
        self._open()

    def _open(self) -> None:
        self._link_type, kind, self._longest, is_loopback = _facts(self._name)
        tap = socket.socket(socket.AF_PACKET, kind, 0)
        try:
            tap.setsockopt(SOL_PACKET, VERSION, VERSION_3)
            frames = BLOCKS * BLOCK_OCTETS // FRAME_OCTETS
            ring = (BLOCK_OCTETS, BLOCKS, FRAME_OCTETS, frames, HAND_OVER_MS, 0, 0)
            tap.setsockopt(SOL_PACKET, RX_RING, struct.pack("7I", *ring))
            close_gate(tap, headers_only(ethernet=self._link_type is LinkType.ETHERNET))
            if is_loopback:  # there every frame would show twice, going and coming
                tap.setsockopt(SOL_PACKET, IGNORE_OUTGOING, 1)
            memory = mmap.mmap(tap.fileno(), BLOCKS * BLOCK_OCTETS)
            self._socket = tap
            # Until here the socket belongs to no protocol, so nothing can have come in unfiltered.
            self._listen(socket.if_nametoindex(self._name))
        except BaseException:
            tap.close()
            raise
        self._block = 0  # the one to be handed over next
        self._words = memoryview(memory).cast("I")
        self._memory = np.frombuffer(memory, np.uint8)

    def _listen(self, index: int) -> None:
        """Binds the socket to the port that has this index now."""
        self._socket.bind((self._name, EVERY_PROTOCOL))
        member = struct.pack("iHH8x", index, PROMISCUOUS, 0)
        self._socket.setsockopt(SOL_PACKET, ADD_MEMBERSHIP, member)
        self._index = index

    def _look_for_port(self) -> None:
        """Listens again where the port has vanished and come back; that takes no right."""
        with contextlib.suppress(OSError, TapError):  # not there: looked for again in a moment
            index = socket.if_nametoindex(self._name)
            if index != self._index and _facts(self._name).link_type is self._link_type:
                self._listen(index)
                self.remark(f"{self._name} vanished and came back")

    @property
    def name(self) -> str:
        """The port's name."""
        return self._name

    def batches(self) -> Iterator[FrameBatch]:
        """Yields a batch for each block; without any, a silence several times a second."""
        ready = select.poll()
        ready.register(self._socket, select.POLLIN | select.POLLERR)
        self._reading = True
        try:
            left = BLOCKS  # to be read after the end is asked for, of those that are ready then
            while left:
                left -= self._closed
                head = self._block * BLOCK_OCTETS // 4
                if self._words[head + STATUS] & OURS:
                    yield self._batch(self._block)
                    self._words[head + STATUS] = KERNELS
                    self._block = (self._block + 1) % BLOCKS
                    continue
                if self._closed:
                    break
                for _, event in ready.poll(WAIT_MS):
                    if event & select.POLLERR:
                        self._complain()
                self._look_for_port()
                # Looked at before the clock: a block handed over since then is read first.
                if not self._words[head + STATUS] & OURS:
                    self._until = max(self._until, time.time_ns() - NOT_YET_NS)
                    yield silence(self._link_type, self._until)
        finally:
            self._reading = False
            if self._closed:
                self._socket.close()

    def _batch(self, block: int) -> FrameBatch:
        """Returns a block's frames, in the memory in which the kernel wrote them."""
        begin, words = block * BLOCK_OCTETS, self._words
        place = begin + words[begin // 4 + FIRST]
        places = []
        for _ in range(words[begin // 4 + PACKETS]):
            places.append(place)
            place += words[place // 4]
        at = np.array(places, np.int64)
        head = gather(self._memory, at, PACKET)
        original = head["original"].astype(np.int64)
        original += np.where(head["status"] & VLAN_VALID, VLAN_TAG, 0)
        times = head["sec"].astype(np.int64) * 1_000_000_000 + head["nsec"]
        self._note(original)
        if len(times):
            self._until = max(self._until, int(times.max()) + 1)
        return FrameBatch(
            self._memory,
            at + head["mac"],
            head["captured"].astype(np.int64),
            original,
            times,
            self._link_type,
            self._until,
        )

    def _note(self, original: Longs) -> None:
        """Counts frames, and those that were merged before we saw them."""
        self._frames += len(original)
        self._octets += int(original.sum())
        oversize = int(np.count_nonzero(original > self._longest))
        if oversize:
            self._oversize += oversize
            self.remark(
                f"frames above the MTU of {self._name}: an offload merges packets, so octets per "
                "packet are false; turn receive and segmentation offloads off on this port"
            )

    def _complain(self) -> None:
        """Takes the socket's error, and says what it means."""
        code = self._socket.getsockopt(socket.SOL_SOCKET, socket.SO_ERROR)
        if code == errno.ENETDOWN:
            self.remark(f"{self._name} went down; what passed meanwhile was not heard")
        elif code:
            self.remark(f"{self._name}: {errno.errorcode.get(code, code)}")
        time.sleep(WAIT_MS / 1000)  # an error that stays would keep us from waiting

    def remark(self, text: str) -> None:
        """Adds what a reader of the figures must know, once."""
        self._remarks[text] = None

    def counters(self) -> CounterReading | None:
        """Returns the port's counters now."""
        return self._counters.read(time.time_ns())

    def statistics(self) -> TapStatistics:
        """Returns how well the port was heard so far."""
        if not self._closed and self._socket.fileno() >= 0:
            told = self._socket.getsockopt(SOL_PACKET, STATISTICS, 12)
            self._dropped += struct.unpack("3I", told)[1]  # since it was asked last
        return TapStatistics(
            self._frames, self._octets, self._dropped, self._oversize, tuple(self._remarks)
        )

    def close(self) -> None:
        """Ends `batches` within a moment; whoever reads them still closes the socket."""
        self._closed = True
        if not self._reading:
            self._socket.close()


class Facts(NamedTuple):
    """What kind of port it is.

    Attributes:
        link_type: What its frames begin with, as they are handed over.
        socket_kind: Whether they are to be handed over with their link header or without.
        longest: Octets of the longest frame it can carry.
        is_loopback: Whether it leads back to this machine.
    """

    link_type: LinkType
    socket_kind: socket.SocketKind
    longest: int
    is_loopback: bool


def _facts(name: str) -> Facts:
    request = struct.pack("16s24x", name.encode()[:15])
    try:
        with socket.socket(socket.AF_INET, socket.SOCK_DGRAM) as asked:
            hardware = struct.unpack_from("H", fcntl.ioctl(asked, GET_HARDWARE, request), 16)[0]
            mtu = struct.unpack_from("i", fcntl.ioctl(asked, GET_MTU, request), 16)[0]
    except OSError:
        ports = ", ".join(port for _, port in socket.if_nameindex())
        raise TapError(name, got="no such port", wanted=f"one of {ports}") from None
    longest, is_loopback = mtu + ROOM_FOR_HEADER, hardware == LOOPBACK
    if hardware in ETHERNETS:
        return Facts(LinkType.ETHERNET, socket.SOCK_RAW, longest, is_loopback)
    if hardware in RAW_IP:
        return Facts(LinkType.RAW, socket.SOCK_RAW, longest, is_loopback)
    if hardware in TUNNELS:
        return Facts(LinkType.RAW, socket.SOCK_DGRAM, longest, is_loopback)
    raise TapError(
        name,
        got=f"a port of hardware type {hardware}",
        wanted="Ethernet, the loopback, PPP or an IP tunnel",
    )
