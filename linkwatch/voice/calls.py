"""Streams -> calls, and calls -> conversations.

A call is a leg: the streams between two pairs of addresses and ports. A conversation is what
people hold: a leg that a relay passes on, or that moves to another port, keeps its SSRC, so calls
that share one at nearly the same time are one conversation.
"""

from collections import deque
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field

from linkwatch.voice.figures import StreamState
from linkwatch.voice.streams import SECOND_NS, SILENT_NS, StreamReport

End = tuple[int, int]
# A leg that moves begins its new path at once; a relay passes on within this time.
MOVED_NS = 3 * SECOND_NS
# Of one sender, and not of two that happen to use the same number (0 and 1 are popular).
TELLING_SSRC = 0xFF


@dataclass(slots=True)
class Call:
    """One or two streams between two pairs of addresses and ports, and their successors.

    Attributes:
        id: Its number, from 1.
        ends: The two ends, each an address as a 128-bit number and a port, the lower first.
        conversation: The id of the first call of its conversation.
        streams: Its streams by serial number: where an SSRC changed there are more than two.
        forward: Serial numbers of those that go from the first end to the second.
        carried: The last report of each stream that has not ended: what it carried since.
        speaking: The stream that carries each direction now, or carried it last: forward, back.
        up: Whether any stream sends now.
    """

    id: int
    ends: tuple[End, End]
    conversation: int
    streams: dict[int, StreamState] = field(default_factory=dict)
    forward: set[int] = field(default_factory=set)
    carried: dict[int, StreamReport] = field(default_factory=dict)
    speaking: tuple[StreamState | None, StreamState | None] = (None, None)
    up: bool = True

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

    Attributes:
        live: The calls of which a stream has not ended, by id.
        ended: The calls that have ended, in the order of their end.
    """

    def __init__(self, keep_ended: int | None = None) -> None:
        self.live: dict[int, Call] = {}
        self.ended: deque[Call] = deque(maxlen=keep_ended)
        self._between: dict[tuple[End, End], Call] = {}
        self._of_stream: dict[int, Call] = {}
        self._with_ssrc: dict[int, Call] = {}
        self._last_id = 0

    def __iter__(self) -> Iterator[Call]:
        return iter(sorted((*self.live.values(), *self.ended), key=lambda call: call.id))

    def __len__(self) -> int:
        return len(self.live) + len(self.ended)

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
            call.carried[report.serial] = report
            heard.add(report.serial)
        for serial in [serial for serial in self._of_stream if serial not in heard]:
            call = self._of_stream.pop(serial)
            del call.carried[serial]
            call.streams[serial] = call.streams[serial]._replace(active=False)
        for call in list(self.live.values()):
            call.speaking = _speaking(call)
            call.up = any(stream is not None and stream.active for stream in call.speaking)
            if not call.carried:
                self._end(call)

    def _joined(self, report: StreamReport) -> Call:
        """Returns the call that a new stream belongs to, a new one if need be."""
        source, destination = report.ends
        between = (source, destination) if source <= destination else (destination, source)
        call = self._between.get(between)
        # A stream that comes after a silence on both ways is the next call over the same ports.
        if call is None or report.state.first - call.end > SILENT_NS:
            self._last_id += 1
            call = Call(self._last_id, between, self._conversation(report.state, self._last_id))
            self.live[call.id] = self._between[between] = call
        self._of_stream[report.serial] = call
        self._with_ssrc[report.state.ssrc] = call
        if source == between[0]:
            call.forward.add(report.serial)
        return call

    def _conversation(self, stream: StreamState, otherwise: int) -> int:
        """Returns the conversation that a new call's first stream carries on."""
        other = self._with_ssrc.get(stream.ssrc)
        if stream.ssrc <= TELLING_SSRC or other is None:
            return otherwise
        return other.conversation if stream.first - other.end <= MOVED_NS else otherwise

    def _end(self, call: Call) -> None:
        """Puts a call among the ended, and forgets what only a live one is looked up by."""
        self.ended.append(self.live.pop(call.id))
        if self._between.get(call.ends) is call:
            del self._between[call.ends]
        for stream in call.streams.values():
            if self._with_ssrc.get(stream.ssrc) is call:
                del self._with_ssrc[stream.ssrc]


def _speaking(call: Call) -> tuple[StreamState | None, StreamState | None]:
    """Returns the latest stream of each direction."""
    forward = back = None
    for serial, stream in call.streams.items():
        if serial in call.forward:
            if forward is None or stream.last > forward.last:
                forward = stream
        elif back is None or stream.last > back.last:
            back = stream
    return forward, back


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
