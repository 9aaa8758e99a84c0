"""The stream table: RTP sources and their RFC 3550 statistics, a batch at a time.

A *source* is a pair of addresses and ports with an SSRC. It is on probation until a few packets
have shown that it is RTP; then it is a stream. Its packets of one payload type are a *lane*:
jitter and packetisation belong to lanes, sequence numbers to the source as a whole.

Everything is columns. What happens to nearly every packet (its number is one of the next) is done
for all sources at once; the rest goes through `sequence`, a packet at a time.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from linkwatch.frames import Longs, Rows
from linkwatch.plan.framing import Framing
from linkwatch.voice.figures import StreamState
from linkwatch.voice.groups import Groups, grouping
from linkwatch.voice.index import KeyIndex
from linkwatch.voice.lanes import Lanes
from linkwatch.voice.names import Names, names_of
from linkwatch.voice.recognise import Recogniser
from linkwatch.voice.rtp import Probation, RtpPackets
from linkwatch.voice.sequence import (
    LATE,
    MAX_DROPOUT,
    MEMORY,
    MODULUS,
    START,
    STRAY,
    Numbering,
)

MOST_SOURCES = 32_768  # on probation or accepted; a source costs about 2 kB
SECOND_NS = 1_000_000_000
PROBATION_NS = 5 * SECOND_NS  # who has not shown himself to be RTP by then is forgotten,
PROBATION_CROWDED_NS = SECOND_NS  # and sooner where others wait for the place
SILENT_NS = 3 * SECOND_NS  # without a packet for so long, a stream does not send now,
ENDED_NS = 30 * SECOND_NS  # and after so long it has ended

FREE, ON_PROBATION, ACCEPTED = 0, 1, 2

NUMBERING = (
    *("highest", "lowest", "base", "received", "different", "before", "before_a3"),
    *("copies", "late", "strays", "awaited", "segment"),
)
SOURCE = np.dtype(
    [
        ("state", "u1"),
        ("dscp", "u1"),
        ("dscp_changed", "?"),
        ("serial", "i8"),
        ("first", "i8"),
        ("last", "i8"),
        ("packets", "i8"),
        ("ip_octets", "i8"),
        ("new_frame_octets", "i8"),
        *((name, "i8") for name in NUMBERING),
    ]
)


class StreamReport(NamedTuple):
    """A stream, and what it has carried since the last report.

    Attributes:
        serial: The stream's number, from 1 in the order of acceptance.
        ends: Its source and destination, each an address as a 128-bit number (IPv4 as
            ::ffff:a.b.c.d) and a port.
        state: The stream as it stands.
        link_octets: Octets since the last report after each framing.
        frame_octets: The same as they were on the tap.
    """

    serial: int
    ends: tuple[tuple[int, int], tuple[int, int]]
    state: StreamState
    link_octets: tuple[float, ...]
    frame_octets: int


@dataclass(frozen=True, slots=True)
class StreamStatistics:
    """How full the table is.

    Attributes:
        streams: Accepted streams in it.
        on_probation: Sources in it that are on probation.
        peak: Most of both at once.
        voice_packets: Packets of accepted streams so far, those before acceptance included.
        left_out: Packets that no place was free for.
    """

    streams: int
    on_probation: int
    peak: int
    voice_packets: int
    left_out: int


class StreamTable:
    """The RTP sources heard, with their statistics.

    Args:
        recogniser: Tells what payload types mean.
        framings: The framings to put every packet through, one a link.
        framing_of: Returns which of them costs the stream between two addresses.
    """

    def __init__(
        self,
        recogniser: Recogniser,
        framings: Sequence[Framing],
        framing_of: Callable[[str, str], int],
    ) -> None:
        self._recogniser = recogniser
        self._framings = framings
        self._framing_of = framing_of
        self._index = KeyIndex(MOST_SOURCES)
        self._lanes = Lanes(MOST_SOURCES, recogniser)
        self._source = np.zeros(MOST_SOURCES, SOURCE)
        self._memory = np.zeros((MOST_SOURCES, MEMORY), np.int64)
        self._link_octets = np.zeros((MOST_SOURCES, len(framings)))
        self._new_link_octets = np.zeros((MOST_SOURCES, len(framings)))
        self._probation: dict[int, Probation] = {}
        self._names: dict[int, Names] = {}
        self._free = list(range(MOST_SOURCES - 1, -1, -1))
        self._top = 0  # rows above this one were never used
        self._last_serial = self._peak = self._left_out = self._ended_packets = 0

    @property
    def _used(self) -> Rows:
        """The rows that were ever used: the memory of the others is not even touched."""
        return self._source[: self._top]

    def hear(self, packets: RtpPackets) -> None:
        """Takes in the packets of a batch, in the order of their arrival."""
        row = self._index.find(packets.key).astype(np.int64)
        if (row < 0).any():
            self._admit(packets, row)
            packets, row = packets.chosen(row >= 0), row[row >= 0]
        if not len(row):
            return
        order = grouping(row)
        packets, row = packets.chosen(order), row[order]
        groups = Groups.of(row)
        self._count(groups, packets)
        advance, segment = self._number(groups, packets)
        self._probe(groups, advance, packets)
        fresh = advance >= LATE
        kept = slice(None) if fresh.all() else np.flatnonzero(fresh)
        self._lanes.hear(
            row[kept],
            packets.payload_type[kept],
            segment[kept],
            packets.sequence[kept],
            packets.timestamp[kept],
            packets.time[kept],
            packets.payload_octets[kept],
        )

    def report(self, now: int) -> list[StreamReport]:
        """Returns every stream as it stands, and begins to count anew what each carries.

        Args:
            now: The time, nanoseconds since 1970-01-01 UTC.
        """
        rows = np.flatnonzero(self._used["state"] == ACCEPTED)
        names = [self._names[row] for row in rows.tolist()]
        columns = (
            self._source["serial"][rows].tolist(),
            [name.ends for name in names],
            self._states(rows, names, now),
            map(tuple, self._new_link_octets[rows].tolist()),
            self._source["new_frame_octets"][rows].tolist(),
        )
        reports = list(map(StreamReport._make, zip(*columns, strict=True)))
        self._new_link_octets[rows] = 0
        self._source["new_frame_octets"][rows] = 0
        return reports

    def forget(self, now: int, probation_ns: int = PROBATION_NS) -> None:
        """Gives up the places of streams that have ended and of sources that were never RTP."""
        quiet = now - self._used["last"]
        state = self._used["state"]
        ended = (state == ACCEPTED) & (quiet > ENDED_NS)
        gone = ended | (state == ON_PROBATION) & (quiet > probation_ns)
        rows = np.flatnonzero(gone)
        if not len(rows):
            return
        self._ended_packets += int(self._used["packets"][ended].sum())
        self._lanes.forget(gone)
        self._source[rows] = np.zeros((), SOURCE)
        self._index.keep(np.flatnonzero(self._used["state"] != FREE))
        for row in rows[::-1].tolist():
            self._probation.pop(row, None)
            self._names.pop(row, None)
            self._free.append(row)

    def statistics(self) -> StreamStatistics:
        """Returns how full the table is."""
        accepted = self._used["state"] == ACCEPTED
        return StreamStatistics(
            streams=int(np.count_nonzero(accepted)),
            on_probation=len(self._probation),
            peak=self._peak,
            voice_packets=self._ended_packets + int(self._used["packets"][accepted].sum()),
            left_out=self._left_out + self._lanes.left_out,
        )

    def _admit(self, packets: RtpPackets, row: Longs) -> None:
        """Gives a row to each new source while there are any, and fills in `row`."""
        missing = np.flatnonzero(row < 0)
        while len(missing):
            key = tuple(word[missing] for word in packets.key)
            _, first = np.unique(self._index.mixed(key), return_index=True)
            if len(first) > len(self._free):
                known = row >= 0  # who speaks in this very batch is not quiet
                self._source["last"][row[known]] = packets.time[known]
                self.forget(int(packets.time[-1]), PROBATION_CROWDED_NS)
            first = np.sort(first)[: len(self._free)]
            if not len(first):
                break
            rows = np.array([self._free.pop() for _ in first])
            self._top = max(self._top, int(rows.max()) + 1)
            self._index.add(rows, tuple(word[first] for word in key))
            self._begin(rows, packets, missing[first])
            row[missing] = self._index.find(key)
            missing = missing[row[missing] < 0]
        self._left_out += len(missing)
        self._peak = max(self._peak, MOST_SOURCES - len(self._free))

    def _begin(self, rows: Longs, packets: RtpPackets, first: Longs) -> None:
        """Puts these rows on probation, each with its source's first packet."""
        source, sequence = self._source, START + packets.sequence[first]
        source[rows] = np.zeros((), SOURCE)
        self._memory[rows] = 0
        self._link_octets[rows] = self._new_link_octets[rows] = 0
        source["state"][rows] = ON_PROBATION
        source["first"][rows] = source["last"][rows] = packets.time[first]
        source["dscp"][rows] = packets.dscp[first]
        source["awaited"][rows] = -1
        source["highest"][rows] = sequence - 1
        source["lowest"][rows] = source["base"][rows] = sequence
        times, timestamps = packets.time[first].tolist(), packets.timestamp[first].tolist()
        for row, time, timestamp in zip(rows.tolist(), times, timestamps, strict=True):
            self._probation[row] = Probation(timestamp, time)

    def _count(self, groups: Groups, packets: RtpPackets) -> None:
        """Counts packets, octets and markings."""
        source, row = self._source, groups.owner
        source["packets"][row] += groups.size
        source["last"][row] = np.maximum(source["last"][row], packets.time[groups.last])
        source["ip_octets"][row] += groups.total(packets.ip_octets)
        source["new_frame_octets"][row] += groups.total(packets.frame_octets)
        for link, framing in enumerate(self._framings):
            octets = groups.total(framing.link_octets(packets.ip_octets, packets.ip_header))
            self._link_octets[row, link] += octets
            self._new_link_octets[row, link] += octets
        same = packets.dscp == groups.each(source["dscp"][row])
        if not same.all():
            source["dscp_changed"][row] |= ~groups.all(same)
            source["dscp"][row] = packets.dscp[groups.last]

    def _number(self, groups: Groups, packets: RtpPackets) -> tuple[Longs, Longs]:
        """Follows the sequence numbers.

        Returns by how much each packet's number advances on those before it (LATE, COPY or STRAY
        where it does not), and how often its source's numbering had begun again by then.
        """
        source, row = self._source, groups.owner
        highest = source["highest"][row]
        step = packets.sequence - groups.before(packets.sequence, highest) & MODULUS - 1
        regular = groups.all((step > 0) & (step < MAX_DROPOUT))
        gone = np.cumsum(step)
        number = gone + groups.each(highest - gone[groups.start] + step[groups.start])
        which = slice(None) if regular.all() else np.flatnonzero(groups.each(regular))
        self._memory[groups.each(row)[which], number[which] & MEMORY - 1] = number[which]
        source["highest"][row[regular]] = number[groups.last[regular]]
        source["received"][row[regular]] += groups.size[regular]
        source["different"][row[regular]] += groups.size[regular]
        segment = groups.each(source["segment"][row])
        for group in np.flatnonzero(~regular):
            self._follow(groups, int(group), packets.sequence, step, segment)
        return step, segment

    def _follow(
        self, groups: Groups, group: int, sequence: Longs, advance: Longs, segment: Longs
    ) -> None:
        """Follows the numbers of one source a packet at a time; fills in the last two columns."""
        row, start = int(groups.owner[group]), int(groups.start[group])
        state = self._source[row]
        numbering = Numbering(self._memory[row], *(int(state[name]) for name in NUMBERING))
        for packet in range(start, start + int(groups.size[group])):
            advance[packet] = numbering.take(int(sequence[packet]))
            segment[packet] = numbering.segment
        for name in NUMBERING:
            self._source[name][row] = getattr(numbering, name)

    def _probe(self, groups: Groups, advance: Longs, packets: RtpPackets) -> None:
        """Looks whether sources on probation have shown that they are RTP."""
        for group in np.flatnonzero(self._source["state"][groups.owner] == ON_PROBATION):
            row, start = int(groups.owner[group]), int(groups.start[group])
            probation = self._probation[row]
            for packet in range(start, start + int(groups.size[group])):
                step = int(advance[packet])
                if step == STRAY:
                    probation.fail()
                elif step > 0 and probation.passed(
                    step, int(packets.timestamp[packet]), int(packets.time[packet])
                ):
                    self._accept(row)
                    break

    def _accept(self, row: int) -> None:
        """Makes a source a stream."""
        del self._probation[row]
        self._last_serial += 1
        self._source["state"][row] = ACCEPTED
        self._source["serial"][row] = self._last_serial
        self._names[row] = names_of(self._index.key(row), self._framing_of)

    def _states(self, rows: Longs, names: list[Names], now: int) -> list[StreamState]:
        source = self._source[rows]
        lanes = self._lanes.main(self._top)[rows]
        lane = self._lanes.figures(lanes)
        packet_ms = self._lanes.packet_ms(lanes)
        known = packet_ms > 0
        mean_octets = np.rint(lane["payload_octets"] / np.maximum(lane["packets"], 1))
        packet_times = [ms or None for ms in packet_ms.tolist()]
        codecs = [
            self._recogniser.codec(*lane_of_stream)
            for lane_of_stream in zip(
                lane["payload_type"].tolist(),
                packet_times,
                mean_octets.tolist(),
                lane["clock"].tolist(),
                strict=True,
            )
        ]
        measured = (lane["jitter_packets"] > 0).tolist()
        a_ms = 1000 / np.maximum(lane["clock"], 1)
        mean = lane["jitter_sum"] / np.maximum(lane["jitter_packets"], 1)
        jitters = [
            [value if is_known else None for value, is_known in zip(values, measured, strict=True)]
            for values in (
                (lane["jitter"] * a_ms).tolist(),
                (mean * a_ms).tolist(),
                (lane["jitter_highest"] * a_ms).tolist(),
            )
        ]
        expected = source["before"] + source["highest"] - source["lowest"] + 1
        expected_a3 = source["highest"] - source["base"] + 1 - source["received"]
        link_octets = self._link_octets[rows, [name.framing for name in names]]
        # From the first packet to the end of the last one's speech, so that a steady stream's
        # rate is exactly that of its packets.
        seconds = (source["last"] - source["first"]) / SECOND_NS
        mean_gap = seconds / np.maximum(source["packets"] - 1, 1)
        seconds = seconds + np.where(known, packet_ms / 1000, mean_gap)
        kbps = link_octets * 8 / 1000 / np.maximum(seconds, 1e-3)
        columns = (
            [name.source for name in names],
            [name.destination for name in names],
            [name.ssrc for name in names],
            lane["payload_type"].tolist(),
            [media for _, _, media in codecs],
            [codec for codec, _, _ in codecs],
            [evidence for _, evidence, _ in codecs],
            packet_times,
            source["packets"].tolist(),
            expected.tolist(),
            (expected - source["different"]).tolist(),
            (source["before_a3"] + expected_a3).tolist(),
            source["copies"].tolist(),
            source["late"].tolist(),
            *jitters,
            source["dscp"].tolist(),
            (~source["dscp_changed"]).tolist(),
            source["first"].tolist(),
            source["last"].tolist(),
            source["ip_octets"].tolist(),
            link_octets.tolist(),
            kbps.tolist(),
            (now - source["last"] <= SILENT_NS).tolist(),
        )
        return list(map(StreamState._make, zip(*columns, strict=True)))
