"""The one loop: a batch in, a Snapshot out whenever a tick is due.

Time is the frames' time. Ticks lie on whole multiples of the interval, so a capture read tomorrow
has its ticks, and raises its alarms, at the very seconds at which they came live.
"""

from collections import Counter
from collections.abc import Iterator

import numpy as np

from linkwatch.frames import CounterReading, FrameBatch, TapStatistics
from linkwatch.plan.planfile import Plan
from linkwatch.voice.listener import Call, Listener, StreamState, most_at_once
from linkwatch.watch.alarms import AlarmBook
from linkwatch.watch.calls import call_state, codec_of, packet_ms_of
from linkwatch.watch.crossing import Crossings
from linkwatch.watch.judge import Judge
from linkwatch.watch.ledger import Ledger, Load
from linkwatch.watch.snapshot import Alarm, CallState, CodecCount, Snapshot, TapHealth

SECOND_NS = 1_000_000_000
# A silent stretch of a capture is passed over after this time: every stream has ended and every
# alarm has cleared by then.
SILENCE_NS = 60 * SECOND_NS
# A clock that was set back this far is believed.
SET_BACK_NS = 2 * SECOND_NS
KEPT_ENDED = 1000
ENDED_SHOWN = 50


class Monitor:
    """Holds what is seen on a tap against a plan.

    Args:
        plan: What was promised.
        tap_name: What people call the tap.
        every_s: Seconds between snapshots, by the frames' time.
        hearing: False where packets may not be read and only counters are known.
        keep_all: Whether to keep every stream, call and alarm to the end, as for a capture; a
            live watch keeps the latest.
        with_calls: Whether snapshots carry the calls.
    """

    def __init__(
        self,
        plan: Plan,
        tap_name: str,
        *,
        every_s: float = 1.0,
        hearing: bool = True,
        keep_all: bool = False,
        with_calls: bool = True,
    ) -> None:
        self._plan = plan
        self._tap_name = tap_name
        self._hearing = hearing
        self._with_calls = with_calls
        self._every = max(1, round(every_s * SECOND_NS))
        kept = None if keep_all else KEPT_ENDED
        self._crossings = Crossings(plan)
        self._ledger = Ledger(plan, self._crossings)
        self._judge = Judge(plan, self._crossings)
        self._alarms = AlarmBook(plan.alarms.hold_seconds, kept)
        self._listener = Listener(
            plan.payload_types,
            [link.framing for link in plan.links],
            self._crossings.first_link,
            kept,
        )
        self._tick: int | None = None  # the next one
        self._unfinished = False  # whether frames were heard since the last tick
        self._counters: CounterReading | None = None
        self._load: Load | None = None
        self._tap = TapStatistics()

    def feed(
        self, batch: FrameBatch, tap: TapStatistics, counters: CounterReading | None
    ) -> Iterator[Snapshot]:
        """Takes in a batch and yields the snapshots that have become due.

        Args:
            batch: The next frames of the tap.
            tap: How well the tap hears, up to them.
            counters: The interface counters now, where there are any.
        """
        self._tap = tap
        times = np.maximum.accumulate(batch.times)
        done = 0
        self._begin(int(times[0]) if len(times) else batch.until, batch.until)
        while self._tick is not None and self._tick <= batch.until:
            upto = int(np.searchsorted(times, self._tick))
            if upto > done:
                self._listener.hear(batch.part(done, upto, self._tick))
                done = upto
            yield self._conclude(self._tick, counters)
            self._unfinished = False
            self._tick += self._every
            following = int(times[done]) if done < len(times) else batch.until
            if following - self._tick > SILENCE_NS:
                self._tick = max(self._tick, self._aligned(following) - SILENCE_NS // 2)
        if done < len(batch):
            self._listener.hear(batch.part(done, len(batch), batch.until))
            self._unfinished = True

    def finish(self, tap: TapStatistics) -> Iterator[Snapshot]:
        """Yields a last snapshot for frames after the last tick, at the next whole one."""
        self._tap = tap
        if self._tick is not None and self._unfinished:
            yield self._conclude(self._tick, self._counters)
            self._unfinished = False

    def _begin(self, first: int, until: int) -> None:
        """Sets the first tick, or sets it again where the clock was set back."""
        set_back = self._tick is not None and until < self._tick - self._every - SET_BACK_NS
        if self._tick is None or set_back:
            self._tick = self._aligned(first) + self._every

    def _aligned(self, time: int) -> int:
        return time // self._every * self._every

    def _conclude(self, now: int, counters: CounterReading | None) -> Snapshot:
        """Closes the interval that ends at `now`."""
        interval_s = self._every / SECOND_NS
        self._listener.conclude(now)
        calls = self._listener.calls.live.values()
        self._load = _load(self._counters, counters, self._load)
        self._counters = counters
        links = self._ledger.enter(calls, interval_s, self._load)
        voice = self._listener.statistics()
        self._alarms.look(
            (
                *self._judge.of_tap(now, self._tap, voice.left_out, counters),
                *self._judge.of_links(links),
                *self._judge.of_calls(calls),
            ),
            now,
        )
        up = [call for call in calls if call.up]
        crossing = sum(1 for call in up if any(self._crossings.of(call)))
        return Snapshot(
            time=now,
            interval_s=interval_s,
            site=self._plan.site,
            tap=TapHealth(
                name=self._tap_name,
                hearing=self._hearing,
                packets=self._tap.frames,
                dropped=self._tap.dropped,
                voice_packets=voice.voice_packets,
                streams=voice.streams,
                remarks=self._tap.remarks,
            ),
            links=links,
            calls_up=crossing,
            elsewhere_up=len(up) - crossing,
            calls=self._shown(interval_s) if self._with_calls else (),
            alarms=self._alarms.standing(),
            cleared=self._alarms.cleared(),
            codecs=_codecs(up),
        )

    def _shown(self, interval_s: float) -> tuple[CallState, ...]:
        """Returns the calls a snapshot carries: the live ones, and the last that have ended."""
        book = self._listener.calls
        lately = tuple(book.ended)[-ENDED_SHOWN:]
        shown = sorted((*book.live.values(), *lately), key=lambda call: call.id)
        return tuple(self._call_state(call, interval_s) for call in shown)

    def _call_state(self, call: Call, interval_s: float) -> CallState:
        return call_state(call, self._plan, self._crossings, self._ledger, interval_s)

    def calls(self) -> tuple[CallState, ...]:
        """Returns the calls that are kept, in the order in which they were found."""
        return tuple(
            self._call_state(call, self._every / SECOND_NS) for call in self._listener.calls
        )

    def streams(self) -> dict[int, StreamState]:
        """Returns the streams that are kept, by serial number."""
        return self._listener.streams

    def alarms(self) -> tuple[Alarm, ...]:
        """Returns the alarms that are kept, in the order in which they were raised."""
        return self._alarms.all()

    def most_calls(self) -> tuple[int, int]:
        """Returns the most calls, and the most conversations, that were up at once."""
        calls = list(self._listener.calls)
        spans: dict[int, tuple[int, int]] = {}
        for call in calls:
            start, end = spans.get(call.conversation, (call.start, call.end))
            spans[call.conversation] = min(start, call.start), max(end, call.end)
        return most_at_once((call.start, call.end) for call in calls), most_at_once(spans.values())


def _codecs(up: list[Call]) -> tuple[CodecCount, ...]:
    """Returns how many of these calls use which codec and packetisation."""
    used = Counter((codec_of(call), packet_ms_of(call)) for call in up)
    return tuple(CodecCount(codec, ms, calls) for (codec, ms), calls in used.most_common())


def _load(
    before: CounterReading | None, now: CounterReading | None, last: Load | None
) -> Load | None:
    """Returns the traffic between two readings; without a new one, what it was last."""
    if before is None or now is None or now.time <= before.time:
        return last
    seconds = (now.time - before.time) / SECOND_NS
    return Load(
        (now.received - before.received) * 8 / 1000 / seconds,
        (now.sent - before.sent) * 8 / 1000 / seconds,
    )
