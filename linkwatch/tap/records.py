"""The two capture formats: where the frames lie in a piece of a file, and what is told of them.

Only the places of the records are found one after another; their heads are read as columns.
pcap and pcapng are those of the IETF's drafts "PCAP Capture File Format" and "PCAP Next Generation
Capture File Format".
"""

import struct
from collections import Counter
from dataclasses import dataclass, field
from typing import NamedTuple, Protocol, TypeAlias, cast

import numpy as np
import numpy.typing as npt

from linkwatch.errors import CaptureError
from linkwatch.frames import LinkType, Longs, Octets, Rows, gather
from linkwatch.tap.walk import Chain, records

Mask: TypeAlias = npt.NDArray[np.bool_]

SECOND_NS = 1_000_000_000
LONGEST_FRAME = 256 << 10  # octets; no link carries frames so long, so a longer one is corrupt
ALSO_RAW = {12, 14}  # values that some systems write for raw IP


class Frames(NamedTuple):
    """Frames found in a piece of a capture; columns of one length.

    Attributes:
        at: Where each one's octets begin in the piece.
        captured, original: Octets there, and on the wire.
        times: Nanoseconds since 1970-01-01 UTC.
        link_type: The link type's number of each.
    """

    at: Longs
    captured: Longs
    original: Longs
    times: Longs
    link_type: Longs


NOTHING = Frames(*(np.empty(0, np.int64) for _ in Frames._fields))


class Found(NamedTuple):
    """What was found in a piece of a capture.

    Attributes:
        frames: The frames of the whole records from the given place on.
        used: Where these records end.
        fault: What is wrong with what stands there, or "" where there is just no more.
    """

    frames: Frames
    used: int
    fault: str = ""


class Format(Protocol):
    """A capture format, with what it has learned of the file so far.

    Attributes:
        left_out: Frames of link types that cannot be read, by the type's number.
        damaged: Frames whose lengths or interfaces cannot be.
    """

    left_out: Counter[int]
    damaged: int

    def find(self, piece: memoryview, place: int) -> Found:
        """Returns the frames from a place in a piece on; a little room follows the piece.

        There may be more behind them: to be asked again from where they end, until it uses none.
        """
        ...


def format_of(head: bytes, name: str) -> tuple[Format, int]:
    """Returns the format of a capture that begins with these octets, and where its records begin.

    Raises:
        CaptureError: It is no capture.
    """
    if len(head) < PCAP_HEAD:
        raise CaptureError(name, got=f"{len(head)} octets", wanted="a pcap or pcapng capture")
    for order in "<>":
        magic = struct.unpack_from(order + "I", head)[0]
        if magic in PCAP_UNITS:
            link_type = struct.unpack_from(order + "I", head, 20)[0] & 0xFFFF
            return Pcap(order, PCAP_UNITS[magic], known_link_type(link_type, name)), PCAP_HEAD
    if head[:4] == SECTION_MAGIC:
        return Pcapng(name), 0
    raise CaptureError(
        name, got=f"a file that begins with {head[:4].hex(' ')}", wanted="a pcap or pcapng capture"
    )


def _with_room(piece: memoryview) -> Octets:
    """Returns the whole buffer that a piece begins, with the room that follows it."""
    return np.frombuffer(cast("bytearray", piece.obj), np.uint8)


def known_link_type(number: int, name: str) -> int:
    """Returns a link type's number as `LinkType` has it.

    Raises:
        CaptureError: We cannot read such frames.
    """
    if number in ALSO_RAW:
        return int(LinkType.RAW)
    if number not in set(LinkType):
        wanted = ", ".join(f"{kind.name} ({int(kind)})" for kind in LinkType)
        raise CaptureError(name, got=f"link type {number}", wanted=f"one of {wanted}")
    return number


# -- pcap --------------------------------------------------------------------------------------

PCAP_HEAD, PCAP_RECORD = 24, 16
# A record's head is seconds, part of a second, octets captured and original. The upper half of the
# seconds stays the same for 18 hours.
PCAP_CHAIN = Chain(
    length_at=8,
    uncounted=PCAP_RECORD,
    least=PCAP_RECORD,
    longest=PCAP_RECORD + LONGEST_FRAME,
    multiple=1,
    head=PCAP_RECORD,
    alike=0xFFFF0000,
    common=(3, 2),
)
PCAP_UNITS = {0xA1B2C3D4: 1000, 0xA1B23C4D: 1}  # nanoseconds of the second time field's unit


@dataclass(slots=True)
class Pcap:
    """The older format: one link type, a fixed head before each frame.

    Attributes:
        order: "<" or ">".
        unit_ns: Nanoseconds of a unit of the second time field.
        link_type: Of all frames.
        left_out, damaged: See `Format`; none here, where every record is a frame.
    """

    order: str
    unit_ns: int
    link_type: int
    left_out: Counter[int] = field(default_factory=Counter)
    damaged: int = 0

    def find(self, piece: memoryview, place: int) -> Found:
        """See `Format`."""
        places, place, corrupt = records(piece, place, self.order, PCAP_CHAIN)
        fault = "no record's head" if corrupt else ""
        return Found(self._frames(piece, places), place, fault)

    def _frames(self, piece: memoryview, places: Longs) -> Frames:
        field_type = np.dtype(f"{self.order}u4")
        layout = np.dtype([(name, field_type) for name in ("sec", "unit", "captured", "original")])
        head = gather(_with_room(piece), places, layout)
        times = head["sec"].astype(np.int64) * SECOND_NS
        times += head["unit"].astype(np.int64) * self.unit_ns
        return Frames(
            places + PCAP_RECORD,
            head["captured"].astype(np.int64),
            head["original"].astype(np.int64),
            times,
            np.full(len(places), self.link_type),
        )


# -- pcapng ------------------------------------------------------------------------------------

SECTION_MAGIC = b"\x0a\x0d\x0d\x0a"
SECTION, INTERFACE, OLD_PACKET, SIMPLE_PACKET, PACKET = 0x0A0D0D0A, 1, 2, 3, 6
LITTLE, BIG = b"\x4d\x3c\x2b\x1a", b"\x1a\x2b\x3c\x4d"
BLOCK_FRAME, BLOCK_LEAST = 8, 12  # octets before a block's body; and of an empty block
LONGEST_BLOCK = 16 << 20  # octets; no known block comes near it
# A block's head is its kind and its length; nearly all blocks are packets.
BLOCK_CHAIN = Chain(
    length_at=4,
    uncounted=0,
    least=BLOCK_LEAST,
    longest=LONGEST_BLOCK,
    multiple=4,
    head=BLOCK_FRAME,
    alike=0xFFFFFFFF,
    common=(0, 1),
)
PACKET_HEAD, SIMPLE_HEAD = 20, 4
RESOLUTION, OFFSET = 9, 14  # options of an interface
MICROSECONDS = 6  # the resolution where none is told
MOST_INTERFACES = 1024


class Interface(NamedTuple):
    """What an interface description says.

    Attributes:
        link_type: Its number.
        readable: Whether we can read such frames.
        snaplen: Octets captured at most, 0 for no limit.
        resolution: Of its times, as the option has it: a power of ten, or of two with bit 7.
        offset_s: Seconds to add.
    """

    link_type: int
    readable: bool
    snaplen: int
    resolution: int = MICROSECONDS
    offset_s: int = 0

    def nanoseconds(self, ticks: Rows) -> Longs:
        """Returns times in nanoseconds, from times in this interface's units."""
        power = self.resolution & 0x7F
        if self.resolution & 0x80:
            whole = (ticks >> np.uint64(min(power, 63))).astype(np.int64)
            part = ticks & np.uint64((1 << min(power, 63)) - 1)
            times = whole * SECOND_NS + (part / 2.0**power * SECOND_NS).astype(np.int64)
        elif power <= 9:
            times = ticks.astype(np.int64) * 10 ** (9 - power)
        else:
            times = (ticks // np.uint64(10 ** min(power - 9, 19))).astype(np.int64)
        return times + self.offset_s * SECOND_NS


class Pcapng:
    """The newer format: blocks of many kinds, interfaces with link types of their own.

    Args:
        name: What errors call the file.
    """

    def __init__(self, name: str) -> None:
        self._name = name
        self._order = "<"
        self._interfaces: list[Interface] = []
        self._last_time = 0
        self.left_out: Counter[int] = Counter()
        self.damaged = 0

    def find(self, piece: memoryview, place: int) -> Found:
        """See `Format`; a section of the other byte order ends a find."""
        order = self._order_at(piece, place)
        if not order:
            known = len(piece) - place >= BLOCK_LEAST
            return Found(NOTHING, place, "no section's head" if known else "")
        blocks, used, corrupt = records(piece, place, order, BLOCK_CHAIN)
        fault = "no block's head" if corrupt and self._order_at(piece, used) == order else ""
        kinds = gather(_with_room(piece), blocks, np.dtype(f"{order}u4"))
        begin = np.flatnonzero(kinds == SECTION)
        parts = [NOTHING]
        for start, stop in zip((0, *begin), (*begin, len(blocks)), strict=True):
            if start < stop and kinds[start] == SECTION:
                if self._order_at(piece, blocks[start]) != order:
                    used, fault = int(blocks[start]), ""
                    break
                self._order, self._interfaces = order, []
            found = self._section(piece, blocks[start:stop], kinds[start:stop])
            parts.append(found.frames)
            if found.fault:
                used, fault = found.used, found.fault
                break
        frames = Frames(*map(np.concatenate, zip(*parts, strict=True)))
        return Found(frames, used, fault)

    def _section(self, piece: memoryview, blocks: Longs, kinds: Rows) -> Found:
        """Returns the frames of one section's blocks; `used` counts only with a fault."""
        used, fault = len(piece), ""
        described, before = blocks[kinds == INTERFACE], len(self._interfaces)
        for at in described.tolist():
            if not self._learn_interface(piece, at):
                used, fault = at, "an interface that cannot be"
                break
        is_packet = (kinds == PACKET) | (kinds == SIMPLE_PACKET) | (kinds == OLD_PACKET)
        packets = blocks[is_packet & (blocks < used)]
        if not len(packets):
            return Found(NOTHING, used, fault)
        known = before + np.searchsorted(described, packets)
        return Found(self._frames(piece, packets, known), used, fault)

    def _order_at(self, piece: memoryview, place: int) -> str:
        """Returns the byte order of the block there; a section's head tells a new one, or none."""
        if piece[place : place + 4] != SECTION_MAGIC:
            return self._order
        return {LITTLE: "<", BIG: ">"}.get(bytes(piece[place + 8 : place + 12]), "")

    def _learn_interface(self, piece: memoryview, at: int) -> bool:
        """Takes in an interface's description; returns whether it can be one."""
        order = self._order
        length = struct.unpack_from(order + "I", piece, at + 4)[0]
        if length < BLOCK_LEAST + 8 or len(self._interfaces) >= MOST_INTERFACES:
            return False
        number, _, snaplen = struct.unpack_from(order + "HHI", piece, at + BLOCK_FRAME)
        try:
            link_type, readable = known_link_type(number, self._name), True
        except CaptureError:
            link_type, readable = number, False
        options = _options(order, bytes(piece[at + BLOCK_FRAME + 8 : at + length - 4]))
        resolution = options.get(RESOLUTION, b"")[:1] or bytes([MICROSECONDS])
        offset = options.get(OFFSET, bytes(8))
        offset_s = struct.unpack(order + "q", offset)[0] if len(offset) == 8 else 0
        far = abs(offset_s) > 1 << 33  # beyond any year that nanoseconds can tell
        self._interfaces.append(
            Interface(link_type, readable, snaplen, resolution[0], 0 if far else offset_s)
        )
        return True

    def _frames(self, piece: memoryview, places: Longs, known: Longs) -> Frames:
        """Returns the frames of packets, at whose places so many interfaces were known."""
        four = np.dtype(f"{self._order}u4")
        names = ("kind", "length", "interface", "high", "low", "captured", "original")
        # A simple packet's block may be shorter than the head of the others.
        head = gather(_with_room(piece), places, np.dtype([(n, four) for n in names]))
        simple = head["kind"] == SIMPLE_PACKET
        interface = head["interface"].astype(np.int64)
        # The older packet block has 16 bits of interface, then 16 of drops.
        old = head["kind"] == OLD_PACKET
        interface[old] = interface[old] >> 16 if self._order == ">" else interface[old] & 0xFFFF
        interface[simple] = 0
        ticks = head["high"].astype(np.uint64) << np.uint64(32) | head["low"]
        captured = head["captured"].astype(np.int64)
        original = head["original"].astype(np.int64)
        at = places + BLOCK_FRAME + PACKET_HEAD
        room = head["length"].astype(np.int64) - BLOCK_LEAST - PACKET_HEAD
        if simple.any():
            at[simple] = places[simple] + BLOCK_FRAME + SIMPLE_HEAD
            original[simple] = head["interface"][simple]
            room[simple] += PACKET_HEAD - SIMPLE_HEAD
            limit = self._interfaces[0].snaplen if self._interfaces else 0
            captured[simple] = np.minimum(original[simple], limit or LONGEST_FRAME)
            captured[simple] = np.minimum(captured[simple], room[simple])
        sound = (captured <= room) & (captured <= LONGEST_FRAME) & (interface < known)
        self.damaged += int(np.count_nonzero(~sound))
        times, link_type = np.zeros(len(places), np.int64), np.zeros(len(places), np.int64)
        for number in np.flatnonzero(np.bincount(interface[sound])).tolist():
            of, its = sound & (interface == number), self._interfaces[number]
            times[of] = its.nanoseconds(ticks[of])
            link_type[of] = its.link_type
            if not its.readable:
                self.left_out[its.link_type] += int(np.count_nonzero(of))
                sound &= ~of
        keep = slice(None) if sound.all() else sound
        return Frames(
            at[keep],
            captured[keep],
            original[keep],
            self._timed(times[keep], simple[keep]),
            link_type[keep],
        )

    def _timed(self, times: Longs, simple: Mask) -> Longs:
        """Returns the times, with those before them for simple packets, which tell none."""
        if simple.any():
            last = np.maximum.accumulate(np.where(simple, -1, np.arange(len(times))))
            times = np.where(last < 0, self._last_time, times[last])
        if len(times):
            self._last_time = int(times[-1])
        return times


def _options(order: str, octets: bytes) -> dict[int, bytes]:
    """Returns the options of a block by their codes."""
    options, place = {}, 0
    while place + 4 <= len(octets):
        code, length = struct.unpack_from(order + "HH", octets, place)
        if code == 0:
            break
        options[code] = octets[place + 4 : place + 4 + length]
        place += 4 + (length + 3) // 4 * 4
    return options
