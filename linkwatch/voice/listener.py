"""The one door of `voice`: a batch in; streams and calls as they now stand out."""

from collections.abc import Callable, Mapping, Sequence

from linkwatch.frames import FrameBatch
from linkwatch.plan.framing import Framing
from linkwatch.voice.calls import Call, CallBook, most_at_once
from linkwatch.voice.figures import StreamState
from linkwatch.voice.headers import datagrams
from linkwatch.voice.recognise import Recogniser
from linkwatch.voice.rtp import possible_rtp
from linkwatch.voice.streams import StreamStatistics, StreamTable


def _first(_source: str, _destination: str) -> int:
    return 0


class Listener:
    """Finds the calls in batches of frames.

    Args:
        payload_types: What the plan says that dynamic payload types mean, by number.
        framings: The framings to cost every packet with, one a link; at least one.
        framing_of: Returns which of them costs a stream, by the addresses of its source and its
            destination.
        keep_ended: How many ended calls to keep; None keeps all.
    """

    def __init__(
        self,
        payload_types: Mapping[int, str],
        framings: Sequence[Framing],
        framing_of: Callable[[str, str], int] = _first,
        keep_ended: int | None = None,
    ) -> None:
        self._table = StreamTable(Recogniser(payload_types), framings, framing_of)
        self._keep_ended = keep_ended
        self._streams: dict[int, StreamState] = {}
        self.calls = CallBook(keep_ended)

    def hear(self, batch: FrameBatch) -> None:
        """Takes in a batch."""
        if len(batch):
            self._table.hear(possible_rtp(batch, datagrams(batch)))

    def conclude(self, now: int) -> None:
        """Brings streams and calls up to date.

        Args:
            now: The time, nanoseconds since 1970-01-01 UTC.
        """
        reports = self._table.report(now)
        self.calls.update(reports)
        self._table.forget(now)
        if self._keep_ended is None:
            self._streams.update((report.serial, report.state) for report in reports)

    @property
    def streams(self) -> dict[int, StreamState]:
        """Every stream so far by serial number; only those of kept calls where not all are kept."""
        if self._keep_ended is None:
            return self._streams
        return {serial: stream for call in self.calls for serial, stream in call.streams.items()}

    def statistics(self) -> StreamStatistics:
        """Returns how full the stream table is."""
        return self._table.statistics()


__all__ = ["Call", "Listener", "StreamState", "StreamStatistics", "most_at_once"]
