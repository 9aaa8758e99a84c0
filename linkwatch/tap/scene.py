"""The built-in scene as a tap: real frames of an invented cutover, told in `story`.

Every frame is made from its flow's template; what changes from packet to packet is written into
whole columns. What chance does to a packet (delay, loss, a copy) is a hash of its flow and number,
so the scene is the same however it is cut into batches.
"""

import struct
from collections.abc import Iterator
from importlib.resources import files
from ipaddress import ip_address

import numpy as np
import numpy.typing as npt

from linkwatch.frames import CounterReading, FrameBatch, LinkType, Longs, Octets, TapStatistics
from linkwatch.tap import story
from linkwatch.tap.story import Flow

START_NS = 1_772_438_400 * 10**9  # 2026-03-02 08:00:00 UTC, a Monday
SECOND_NS, MS_NS = 10**9, 10**6
BATCH_MS = 100
MADE_MS = 1000  # made at once and then cut: a call of numpy costs more than the frames of a batch
LONGEST_DELAY_MS = 60  # more than jitter, lateness and copy can come to
WIDTH = 256  # octets of a row of templates; the longest frame is shorter
JITTER_NS, BAD_JITTER_NS = 2 * MS_NS, 24 * MS_NS
LATE_SHARE, COPY_SHARE, LATE_NS, COPY_NS = 0.0006, 0.0004, 27 * MS_NS, 300_000
HASHES = (0x9E3779B97F4A7C15, 0xC2B2AE3D27D4EB4F, 0x165667B19E3779F9)
RTP_OCTETS, UDP_OCTETS = 12, 8
MARKER, EVENT_ENDS = 0x80, 0x80  # the highest bits of their octets (RFC 3550 5.1, RFC 4733 2.3)


def scene_plan_text() -> str:
    """Returns the scene's plan (YAML)."""
    return files("linkwatch.tap").joinpath("scene.yaml").read_text("utf-8")


class Scene:
    """The built-in scene as a tap, as fast as it is asked for.

    Args:
        seed: Whose calls come when; the story stays the same.
        start_ns: When it begins, nanoseconds since 1970-01-01 UTC.
    """

    name = "scene"

    def __init__(self, seed: int = 7, start_ns: int = START_NS) -> None:
        self._start = start_ns
        self._flows = story.flows(seed)
        self._closed = False
        self._frames = self._octets = 0
        self._now = 0  # in the scene, nanoseconds
        templates = [_template(flow) for flow in self._flows]
        self._templates = np.zeros((len(templates), WIDTH), np.uint8)
        for row, template in enumerate(templates):
            self._templates[row, : len(template)] = np.frombuffer(template, np.uint8)
        self._length = np.array([len(template) for template in templates])
        self._at = np.array([_payload_at(flow) for flow in self._flows])
        self._every = np.array([_every_ns(flow) for flow in self._flows])
        self._first = _ns(flow.start_s for flow in self._flows)
        self._last = _ns(flow.end_s for flow in self._flows)
        self._sequence = np.array([flow.first_sequence for flow in self._flows])
        self._timestamp = np.array([flow.first_timestamp for flow in self._flows])
        self._noise = np.array([flow.payload_type < 0 for flow in self._flows])
        self._to_site = np.array([flow.destination[0] in _site(flow) for flow in self._flows])
        self._pause = _stretches(flow.pause_s for flow in self._flows)
        self._only = _stretches(flow.only_s for flow in self._flows)
        self._events = np.array([flow.payload_type == story.EVENT for flow in self._flows])
        self._changing = np.zeros((len(templates), WIDTH), np.bool_)
        for row, flow in enumerate(self._flows):
            self._changing[row, slice(*(self._at[row] + octet for octet in flow.changing))] = True

    def batches(self) -> Iterator[FrameBatch]:
        """Yields the frames of a tenth of a second of the scene each."""
        for begin in range(0, story.LENGTH_S * SECOND_NS, MADE_MS * MS_NS):
            end = begin + MADE_MS * MS_NS
            made, done = self._between(begin, end), 0
            for until in range(begin + BATCH_MS * MS_NS, end + 1, BATCH_MS * MS_NS):
                if self._closed:
                    return
                stop = int(np.searchsorted(made.times, self._start + until))
                batch = made.part(done, stop, self._start + until)
                self._now, done = until, stop
                self._frames += len(batch)
                self._octets += int(batch.original.sum())
                yield batch

    def _between(self, begin: int, end: int) -> FrameBatch:
        """Returns the frames that pass between two moments of the scene, in nanoseconds."""
        flow, number = self._sent(begin - LONGEST_DELAY_MS * MS_NS, end)
        due = self._first[flow] + number * self._every[flow]
        lost, delay, copied = self._fate(flow, number, due)
        only_from, only_to = self._only[0][flow], self._only[1][flow]
        speaks = (due < self._pause[0][flow]) | (due >= self._pause[1][flow])
        speaks &= (only_to == 0) | (due >= only_from) & (due < only_to)
        seen = due + delay
        sent = np.flatnonzero(speaks & ~lost)
        twice = np.concatenate((sent, sent[copied[sent]]))
        seen = seen[twice] + np.where(np.arange(len(twice)) >= len(sent), COPY_NS, 0)
        passing = np.flatnonzero((seen >= begin) & (seen < end))
        order = passing[np.argsort(seen[passing], kind="stable")]
        return self._frames_of(flow[twice[order]], number[twice[order]], seen[order], end)

    def _sent(self, begin: int, end: int) -> tuple[Longs, Longs]:
        """Returns flow and number of every packet that is due between two moments."""
        low = np.maximum(-(-(begin - self._first) // self._every), 0)
        high = -(-(np.minimum(end, self._last) - self._first) // self._every)
        count = np.maximum(high - low, 0)
        flow = np.repeat(np.arange(len(count)), count)
        number = np.arange(len(flow)) - np.repeat(np.cumsum(count) - count - low, count)
        return flow, number

    def _fate(
        self, flow: Longs, number: Longs, due: Longs
    ) -> tuple[npt.NDArray[np.bool_], Longs, npt.NDArray[np.bool_]]:
        """Returns what the network does to each packet: lost or not, its delay, whether copied."""
        chance = _chance(flow, number, 0)
        bad = (due >= story.LOSS_FROM_S * SECOND_NS) & (due < story.LOSS_TO_S * SECOND_NS)
        bad &= self._to_site[flow] & ~self._noise[flow]
        lost = bad & (chance < story.LOSS_SHARE)
        jitter = _chance(flow, number, 1) * np.where(bad, BAD_JITTER_NS, JITTER_NS)
        fate = _chance(flow, number, 2)
        late = (fate < LATE_SHARE) & ~self._noise[flow]
        copied = (fate > 1 - COPY_SHARE) & ~self._noise[flow]
        return lost, jitter.astype(np.int64) + np.where(late, LATE_NS, 0), copied

    def _frames_of(self, flow: Longs, number: Longs, seen: Longs, end: int) -> FrameBatch:
        """Returns frames: their flows' templates, with what changes written into them."""
        octets = self._templates[flow]
        index = np.arange(len(flow))
        rtp = np.flatnonzero(~self._noise[flow])
        of, at = flow[rtp], self._at[flow[rtp]]
        begun = np.where(self._events[of], self._numbered(of, self._only[0]), number[rtp])
        # All packets of an event keep the timestamp of its beginning (RFC 4733 2.2).
        timestamp = self._timestamp[of] + begun * story.TICKS
        _write(octets, rtp, at + 2, self._sequence[of] + number[rtp], 2)
        _write(octets, rtp, at + 4, timestamp, 4)
        event = self._events[of]
        self._tell_events(octets, rtp[event], of[event], (number[rtp] - begun)[event])
        row, octet = np.nonzero(self._changing[flow])
        scattered = _chance(flow[row], number[row] * WIDTH + octet, 0) * 256
        octets[row, octet] = scattered.astype(np.uint8)
        length = self._length[flow]
        return FrameBatch(
            octets.reshape(-1),
            index * WIDTH,
            length,
            length,
            self._start + seen,
            LinkType.ETHERNET,
            self._start + end,
        )

    def _tell_events(self, octets: Octets, rows: Longs, flow: Longs, number: Longs) -> None:
        """Writes marker, end and duration of telephone events, whose packets count from 0."""
        only_from, only_to = self._only
        packets = self._numbered(flow, only_to) - self._numbered(flow, only_from)
        until_end = packets - story.ENDINGS
        at = self._at[flow]
        octets[rows, at + 1] |= np.where(number == 0, MARKER, 0).astype(np.uint8)
        ends = np.where(number >= until_end, EVENT_ENDS, 0)
        octets[rows, at + RTP_OCTETS + 1] |= ends.astype(np.uint8)
        duration = np.minimum(number, until_end) + 1
        _write(octets, rows, at + RTP_OCTETS + 2, duration * story.TICKS, 2)

    def _numbered(self, flow: Longs, moment: Longs) -> Longs:
        """Returns the number of each flow's first packet that is due at its moment or later."""
        number: Longs = -(-(moment[flow] - self._first[flow]) // self._every[flow])
        return number

    def counters(self) -> CounterReading:
        """Returns the counters of the scene's port: its frames, and the site's other traffic."""
        seconds = self._now / SECOND_NS
        full = min(max(seconds - story.FULL_FROM_S, 0), story.FULL_TO_S - story.FULL_FROM_S)
        data = round((seconds * story.DATA_KBPS + full * story.FULL_KBPS) * 1000 / 8)
        time = self._start + self._now
        return CounterReading(time, self._octets // 2 + data, self._octets // 2, True, 100_000)

    def statistics(self) -> TapStatistics:
        """Returns what passed so far."""
        return TapStatistics(self._frames, self._octets)

    def close(self) -> None:
        """Ends the scene."""
        self._closed = True


def _write(octets: Octets, rows: Longs, at: Longs, values: Longs, width: int) -> None:
    """Writes a number of so many octets into each row, the highest octet first."""
    for octet in range(width):
        octets[rows, at + octet] = values >> 8 * (width - 1 - octet) & 0xFF


def _ns(seconds: Iterator[float]) -> Longs:
    return np.array([round(second * SECOND_NS) for second in seconds], np.int64)


def _stretches(of: Iterator[tuple[float, float] | None]) -> tuple[Longs, Longs]:
    """Returns beginnings and ends, nanoseconds; both 0 where there is none."""
    pairs = [stretch or (0.0, 0.0) for stretch in of]
    return _ns(begin for begin, _ in pairs), _ns(end for _, end in pairs)


def _every_ns(flow: Flow) -> int:
    return round((flow.noise_ms or story.PACKET_MS) * MS_NS)


def _site(flow: Flow) -> tuple[str, ...]:
    """Returns the flow's destination where that is the site and its source is not."""
    there, here = flow.destination[0], flow.source[0]
    inside = tuple(prefix.format("") for prefix in (story.SITE, story.SITE_IPV6))
    return (there,) if there.startswith(inside) and not here.startswith(inside) else ()


def _chance(flow: Longs, number: Longs, which: int) -> npt.NDArray[np.float64]:
    """Returns a number from 0 to below 1 for each packet, always the same for the same one."""
    mixed = flow.astype(np.uint64) * np.uint64(HASHES[which]) + number.astype(np.uint64)
    for shift, factor in ((30, HASHES[1]), (27, HASHES[2])):
        mixed = (mixed ^ mixed >> np.uint64(shift)) * np.uint64(factor)
    return (mixed >> np.uint64(11)).astype(np.float64) / 2.0**53


def _payload_at(flow: Flow) -> int:
    """Returns where the UDP payload begins in the flow's frames."""
    return 14 + 4 * flow.vlan + (40 if ":" in flow.source[0] else 20) + UDP_OCTETS


def _template(flow: Flow) -> bytes:
    """Returns a frame of a flow, with number and timestamp 0."""
    if flow.payload_type < 0:
        content = flow.noise_octets
    else:
        content = struct.pack("!BBHII", 0x80, flow.payload_type, 0, 0, flow.ssrc)
        if flow.payload_type == story.EVENT:
            content += bytes((story.DIGIT, story.VOLUME))
        content = content.ljust(RTP_OCTETS + story.PAYLOAD_OCTETS[flow.payload_type], b"\0")
    udp = struct.pack("!HHHH", flow.source[1], flow.destination[1], 8 + len(content), 0) + content
    source, destination = ip_address(flow.source[0]), ip_address(flow.destination[0])
    if source.version == 4:
        kind, total = 0x0800, 20 + len(udp)
        head = (0x45, flow.dscp << 2, total, 0, 0x4000, 63, 17, 0)
        packet = struct.pack("!BBHHHBBH", *head)
    else:
        kind = 0x86DD
        packet = struct.pack("!IHBB", 6 << 28 | flow.dscp << 22, len(udp), 17, 63)
    packet += source.packed + destination.packed + udp
    frame = bytes.fromhex("02005e10000102005e100002")  # locally administered addresses
    if flow.vlan:
        frame += struct.pack("!HH", 0x8100, 20)
    return frame + struct.pack("!H", kind) + packet
