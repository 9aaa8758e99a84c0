"""Lanes: the packets of one source with one payload type, and what is measured on them.

Jitter and packetisation are figures of a codec's packets. Telephone events and comfort noise come
under payload types of their own, so they stay in lanes of their own and spoil nothing.
"""

from typing import Any

import numpy as np
import numpy.typing as npt

from linkwatch.frames import Longs, Rows
from linkwatch.voice.groups import Groups, grouping
from linkwatch.voice.headers import Mask
from linkwatch.voice.jitter import Reals, jitter_after
from linkwatch.voice.recognise import Recogniser, nearest_clock

MOST_LANES = 65_536
PAYLOAD_TYPES = 128
# A clock that no payload type tells is found from timestamps against time, first after this many
# packets, then each time their number has doubled.
CLOCK_PACKETS = 16
LONGEST_PACKET_MS, STEPS_A_MS = 200, 2  # packetisation is told in steps of half a millisecond
# A difference so large is a sender that jumped, not a network that was slow.
JUMP_S = 1.0
HALF, WHOLE = 1 << 31, 1 << 32

LANE = np.dtype(
    [
        ("source", "i4"),
        ("payload_type", "u1"),
        ("speech", "?"),
        ("clock", "i8"),
        ("clock_from", "i8"),
        ("packets", "i8"),
        ("payload_octets", "i8"),
        ("first_time", "i8"),
        ("first_timestamp", "i8"),
        ("time", "i8"),
        ("timestamp", "i8"),
        ("sequence", "i8"),
        ("segment", "i8"),
        ("jitter", "f8"),
        ("jitter_sum", "f8"),
        ("jitter_packets", "i8"),
        ("jitter_highest", "f8"),
    ]
)


class Lanes:
    """The lanes of all sources.

    Args:
        sources: How many sources there may be.
        recogniser: Tells the clocks of payload types.
    """

    def __init__(self, sources: int, recogniser: Recogniser) -> None:
        self._recogniser = recogniser
        self._number = np.zeros((sources, PAYLOAD_TYPES), np.int32)  # 0: no lane
        self._lane = np.zeros(MOST_LANES, LANE)
        self._steps = np.zeros((MOST_LANES, LONGEST_PACKET_MS * STEPS_A_MS + 1), np.uint32)
        self._free = list(range(MOST_LANES - 1, 0, -1))
        self._top = 0  # lanes above this one were never used
        self.left_out = 0

    @property
    def _used(self) -> Rows:
        return self._lane[: self._top]

    def hear(
        self,
        source: Longs,
        payload_type: npt.NDArray[np.uint8],
        segment: Longs,
        sequence: Longs,
        timestamp: Longs,
        time: Longs,
        payload_octets: Longs,
    ) -> None:
        """Takes in packets, each once, sorted by source, each source's as they arrived.

        Columns of one length; `segment` counts how often the source's numbering began again.
        """
        lane = self._lanes_of(source, payload_type)
        if not lane.all():
            lane = self._begin(source, payload_type, timestamp, time)
        order = _order(lane)
        lane = lane[order]
        if not len(lane):
            return
        groups = Groups.of(lane)
        self._measure(groups, segment[order], sequence[order], timestamp[order], time[order])
        self._lane["packets"][groups.owner] += groups.size
        self._lane["payload_octets"][groups.owner] += groups.total(payload_octets[order])

    def _lanes_of(self, source: Longs, payload_type: npt.NDArray[np.uint8]) -> Longs:
        """Returns each packet's lane, 0 where it has none."""
        return self._number[source, payload_type].astype(np.int64)

    def _begin(
        self, source: Longs, payload_type: npt.NDArray[np.uint8], timestamp: Longs, time: Longs
    ) -> Longs:
        """Begins the lanes that are missing; returns each packet's lane, 0 where none is free."""
        missing = np.flatnonzero(self._lanes_of(source, payload_type) == 0)
        new = source[missing] * PAYLOAD_TYPES + payload_type[missing]
        _, first = np.unique(new, return_index=True)
        for packet in missing[np.sort(first)[: len(self._free)]]:
            number = self._free.pop()
            self._top = max(self._top, number + 1)
            meaning = self._recogniser.meaning(int(payload_type[packet]))
            lane = self._lane[number : number + 1]
            lane["source"] = source[packet]
            lane["payload_type"] = payload_type[packet]
            lane["speech"] = meaning.speech
            lane["clock"] = meaning.clock_hz
            lane["first_time"] = time[packet]
            lane["first_timestamp"] = timestamp[packet]
            self._number[source[packet], payload_type[packet]] = number
        lanes = self._lanes_of(source, payload_type)
        self.left_out += int(np.count_nonzero(lanes == 0))
        return lanes

    def _measure(
        self, groups: Groups, segment: Longs, sequence: Longs, timestamp: Longs, time: Longs
    ) -> None:
        """Measures jitter and packetisation on packets sorted by lane."""
        state = self._lane[groups.owner]
        self._settle_clocks(groups, state, timestamp, time)
        clock = groups.each(state["clock"])
        index = np.arange(len(time))
        ordinal = index - groups.each(groups.start - state["packets"])
        ticks = timestamp - groups.before(timestamp, state["timestamp"])
        ticks = (ticks + HALF & WHOLE - 1) - HALF  # the short way round 32 bits
        elapsed = time - groups.before(time, state["time"])
        follows = (ordinal > 0) & (segment == groups.before(segment, state["segment"]))
        follows &= ordinal >= groups.each(state["clock_from"])
        follows &= clock > 0
        difference = np.abs(elapsed * (clock / 1e9) - ticks)
        measured = follows & (difference < clock * JUMP_S)
        self._keep_jitter(groups, state, index, difference, measured)
        step = (sequence - groups.before(sequence, state["sequence"])) & 0xFFFF
        self._keep_steps(groups, follows & (step == 1) & (ticks > 0), ticks, clock)
        for name, column in (("time", time), ("timestamp", timestamp)):
            self._lane[name][groups.owner] = column[groups.last]
        self._lane["sequence"][groups.owner] = sequence[groups.last]
        self._lane["segment"][groups.owner] = segment[groups.last]

    def _settle_clocks(
        self, groups: Groups, state: npt.NDArray[Any], timestamp: Longs, time: Longs
    ) -> None:
        """Finds the clocks that no payload type told, where enough packets have come."""
        before, after = state["packets"], state["packets"] + groups.size
        for i in np.flatnonzero((state["clock"] == 0) & (after >= CLOCK_PACKETS)):
            enough = CLOCK_PACKETS
            while enough <= after[i] and not state["clock"][i]:
                packet = groups.start[i] + enough - 1 - before[i]
                if enough > before[i]:
                    ticks = (timestamp[packet] - state["first_timestamp"][i]) % WHOLE
                    clock = nearest_clock(int(ticks), int(time[packet] - state["first_time"][i]))
                    state["clock"][i] = self._lane["clock"][groups.owner[i]] = clock
                    state["clock_from"][i] = self._lane["clock_from"][groups.owner[i]] = enough
                enough *= 2

    def _keep_jitter(
        self,
        groups: Groups,
        state: npt.NDArray[Any],
        index: Longs,
        difference: Reals,
        measured: Mask,
    ) -> None:
        begins = ~measured
        begins[groups.start] = True
        position = index - np.maximum.accumulate(np.where(begins, index, 0))
        before = np.zeros(len(index))
        before[groups.start] = np.where(measured[groups.start], state["jitter"], 0.0)
        jitter = jitter_after(np.where(measured, difference, 0.0), position, before)
        lane, owner = self._lane, groups.owner
        lane["jitter"][owner] = jitter[groups.last]
        lane["jitter_sum"][owner] += groups.total(np.where(measured, jitter, 0.0))
        lane["jitter_packets"][owner] += groups.total(measured.astype(np.int64))
        highest = np.maximum.reduceat(jitter, groups.start)
        lane["jitter_highest"][owner] = np.maximum(state["jitter_highest"], highest)

    def _keep_steps(self, groups: Groups, regular: Mask, ticks: Longs, clock: Longs) -> None:
        which = np.flatnonzero(regular)
        step = np.rint(ticks[which] * (1000 * STEPS_A_MS) / clock[which]).astype(np.int64)
        short = step < self._steps.shape[1]
        width = self._steps.shape[1]
        place = groups.each(groups.owner)[which[short]] * width + step[short]
        np.add.at(self._steps.reshape(-1), place, np.uint32(1))

    def main(self, sources: int) -> Longs:
        """Returns the lane with most packets of each of the first so many sources.

        Speech goes before all else; 0 is none.
        """
        used = np.flatnonzero(self._used["packets"])
        lane = self._lane[used]
        # The last one written stays, so the best comes last.
        best_last = np.lexsort((-lane["payload_type"].astype(int), lane["packets"], lane["speech"]))
        main = np.zeros(sources, np.int64)
        main[lane["source"][best_last]] = used[best_last]
        return main

    def figures(self, lanes: Longs) -> npt.NDArray[Any]:
        """Returns these lanes as rows of `LANE`."""
        return self._lane[lanes]

    def packet_ms(self, lanes: Longs) -> Reals:
        """Returns each lane's most usual packetisation in ms, 0 while it is not known."""
        most_usual: Longs = self._steps[lanes].argmax(axis=1)
        return most_usual / STEPS_A_MS

    def forget(self, gone: Mask) -> None:
        """Frees the lanes of the sources for which this is true."""
        lanes = np.flatnonzero((self._used["packets"] > 0) & gone[self._used["source"]])
        self._number[self._lane["source"][lanes], self._lane["payload_type"][lanes]] = 0
        self._lane[lanes] = np.zeros((), LANE)
        self._steps[lanes] = 0
        self._free.extend(int(lane) for lane in lanes[::-1])


def _order(lane: Longs) -> Longs | slice:
    """Returns the order that sorts packets by lane and leaves out those without one.

    Packets come sorted by source, so where every source has one lane they are sorted already.
    """
    runs = Groups.of(lane).owner if len(lane) else lane
    if len(runs) == len(set(runs.tolist())) and 0 not in runs:
        return slice(None)
    return grouping(lane)[np.count_nonzero(lane == 0) :]
