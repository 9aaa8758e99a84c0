"""Streams -> calls, and calls -> conversations.

A call is a leg: the streams between two pairs of addresses and ports. A conversation is what
people hold: a leg that a relay passes on, or that moves to another port, keeps its SSRC, so calls
that share one at nearly the same time are one conversation.
"""

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field
from typing import NamedTuple

from linkwatch.voice.figures import StreamState
from linkwatch.voice.streams import SECOND_NS, SILENT_NS, StreamReport

End = tuple[int, int]
# A leg that moves begins its new path at once; a relay passes on within this time.
MOVED_NS = 3 * SECOND_NS
# Of one sender, and not of two that happen to use the same number (0 and 1 are popular).
TELLING_SSRC = 0xFF


class Carried(NamedTuple):
    """What a stream of a call carried since the last report."""

    link_octets: tuple[float, ...]
    frame_octets: int


@dataclass(slots=True)
class Call:
    """One or two streams between two pairs of addresses and ports, and their successors.

    Attributes:
        id: Its number, from 1.
        ends: The two ends, each an address as a 128-bit number and a port, the lower first.
        streams: Its streams by serial number: where an SSRC changed there are more than two.
        forward: Serial numbers of those that go from the first end to the second.
        carried: What each stream carried since the last report.
        up: Whether any stream sends now.
        conversation: The id of the first call of its conversation.
    """

    id: int
    ends: tuple[End, End]
    streams: dict[int, StreamState] = field(default_factory=dict)
    forward: set[int] = field(default_factory=set)
    carried: dict[int, Carried] = field(default_factory=dict)
    up: bool = True
    conversation: int = 0

    @property
    def start(self) -> int:
        """When its first packet was seen, nanoseconds since 1970-01-01 UTC."""
        return min(stream.first for stream in self.streams.values())

    @property
    def end(self) -> int:
        """When its last packet was seen, nanoseconds since 1970-01-01 UTC."""
        return max(stream.last for stream in self.streams.values())

    @property
    def both_ways(self) -> bool:
        """Whether packets were heard in both directions."""
        return 0 < len(self.forward) < len(self.streams)


class CallBook:
    """The calls that were found.

    Args:
        keep_ended: How many calls that have ended to keep; None keeps all.
    """

    def __init__(self, keep_ended: int | None = None) -> None:
        self._keep_ended = keep_ended
        self._calls: dict[int, Call] = {}
        self._between: dict[tuple[End, End], Call] = {}
        self._of_stream: dict[int, Call] = {}
        self._last_id = self.ended_and_gone = 0

    def __iter__(self) -> Iterator[Call]:
        return iter(self._calls.values())

    def __len__(self) -> int:
        return len(self._calls)

    def update(self, reports: Iterable[StreamReport]) -> None:
        """Takes in how every stream stands; a stream that is missing has ended."""
        heard: set[int] = set()
        for report in reports:
            call = self._of_stream.get(report.serial)
            if call is None:
                if report.state.media != "audio":  # video, or not known yet
                    continue
                call = self._joined(report)
            call.streams[report.serial] = report.state
            call.carried[report.serial] = Carried(report.link_octets, report.frame_octets)
            heard.add(report.serial)
        for serial in [serial for serial in self._of_stream if serial not in heard]:
            call = self._of_stream.pop(serial)
            call.carried.pop(serial, None)
            call.streams[serial] = call.streams[serial]._replace(active=False)
        for call in self._calls.values():
            call.up = bool(call.carried) and any(s.active for s in call.streams.values())
        self._drop_oldest()

    def _joined(self, report: StreamReport) -> Call:
        """Returns the call that a new stream belongs to, a new one if need be."""
        source, destination = report.ends
        between = (source, destination) if source <= destination else (destination, source)
        call = self._between.get(between)
        # A stream that comes after a silence on both ways is the next call over the same ports.
        if call is None or report.state.first - call.end > SILENT_NS:
            self._last_id += 1
            call = Call(self._last_id, between)
            call.conversation = self._conversation(report.state, call.id)
            self._calls[call.id] = self._between[between] = call
        self._of_stream[report.serial] = call
        if source == between[0]:
            call.forward.add(report.serial)
        return call

    def _conversation(self, stream: StreamState, otherwise: int) -> int:
        """Returns the conversation that a new call's first stream carries on."""
        if stream.ssrc <= TELLING_SSRC:
            return otherwise
        for call in self._of_stream.values():
            for other in call.streams.values():
                same = other.ssrc == stream.ssrc and other.payload_type == stream.payload_type
                if same and stream.first - other.last <= MOVED_NS:
                    return call.conversation
        return otherwise

    def _drop_oldest(self) -> None:
        if self._keep_ended is None:
            return
        ended = [call for call in self._calls.values() if not call.carried]
        for call in ended[: max(0, len(ended) - self._keep_ended)]:
            del self._calls[call.id]
            if self._between.get(call.ends) is call:
                del self._between[call.ends]
            self.ended_and_gone += 1


def most_at_once(spans: Iterable[tuple[int, int]]) -> int:
    """Returns how many of these spans (start, end) overlap at most, ends included."""
    edges = sorted(
        (time, closes) for start, end in spans for time, closes in ((start, 0), (end, 1))
    )
    now = most = 0
    for _, closes in edges:
        now += -1 if closes else 1
        most = max(most, now)
    return most
