"""What is to be told: the conditions that alarms are raised on, each with cause and remedy.

A judge looks at what a tick has shown. It remembers only what "lately" means: loss is judged over
the last looks, since a burst at the start of a long call must not colour its end.
"""

from collections import deque
from collections.abc import Iterable, Iterator

from linkwatch.frames import CounterReading, TapStatistics
from linkwatch.plan.marking import marking_name
from linkwatch.plan.planfile import LinkPlan, Plan
from linkwatch.voice.calls import Call
from linkwatch.voice.figures import StreamState
from linkwatch.watch.alarms import Condition, Sign
from linkwatch.watch.crossing import Crossings
from linkwatch.watch.snapshot import DirectionState, Kind, LinkState, Severity

DUST_KBPS = 1e-6  # sums of many costs are not exact to the last bit
BACK_WITHIN = 0.95  # of a limit, before what was over it counts as gone
NEARLY_FULL = 0.95  # of the capacity: queues grow long from here (common practice, no source)
LATELY_LOOKS = 10
DEAF_NS = 10_000_000_000  # nothing at all for so long on a live port is worth a word


class Judge:
    """Finds the conditions of each tick.

    Args:
        plan: What was promised.
        crossings: Which links calls cross.
    """

    def __init__(self, plan: Plan, crossings: Crossings) -> None:
        self._plan = plan
        self._crossings = crossings
        self._near_ms = plan.alarms.jitter_ms * BACK_WITHIN
        self._expected: dict[int, int] = {}
        self._lately: dict[int, deque[tuple[int, int]]] = {}
        self._dropped = self._left_out = 0
        self._heard = (0, 0)
        self._heard_at: int | None = None

    def of_tap(
        self, now: int, tap: TapStatistics, left_out: int, counters: CounterReading | None
    ) -> Iterator[Condition]:
        """Yields what keeps the tap from hearing everything, at `now` (nanoseconds)."""
        # Where the counters move but no frame comes, there is just no voice on the link.
        heard = (tap.frames, counters.received + counters.sent if counters else 0)
        if heard != self._heard or self._heard_at is None:
            self._heard, self._heard_at = heard, now
        if tap.dropped > self._dropped:
            text = (
                f"the kernel dropped {tap.dropped - self._dropped} frames before they were read: "
                "figures are too low; give the tap a faster machine or less traffic"
            )
            yield _blind("frames dropped", text)
        if left_out > self._left_out:
            text = (
                f"{left_out - self._left_out} packets left out because the stream table is full: "
                "something floods the tap with sources that are no calls"
            )
            yield _blind("table full", text)
        if counters and counters.up and now - self._heard_at >= DEAF_NS:
            text = "no frame at all is heard: is the port mirrored to this one, and connected?"
            yield _blind("nothing heard", text)
        if counters and not counters.up:
            text = "the tap's port is down or gone: check its cable and its switch port"
            yield Condition(Kind.LINK_DOWN, Severity.CRITICAL, "", "tap", text, at_once=True)
        self._dropped, self._left_out = tap.dropped, left_out

    def of_links(self, links: Iterable[LinkState]) -> Iterator[Condition]:
        """Yields what is over a budget or near a capacity."""
        for link in links:
            for way, state in (("to site", link.to_site), ("from site", link.from_site)):
                yield from _of_budget(link, way, state)
            yield from _of_capacity(link)

    def of_calls(self, calls: Iterable[Call]) -> Iterator[Condition]:
        """Yields what is wrong with calls that are up."""
        up = [call for call in calls if call.up]
        self._remember(up)
        for call in up:
            ways = self._crossings.of(call)
            crossed = [link for link, way in zip(self._plan.links, ways, strict=True) if way]
            now = [stream for stream in call.speaking if stream and stream.active]
            if crossed and self._plan.given:
                yield from _of_planned(call, now, crossed[0])
            if len(now) == 1:
                yield from _of_one_way(call, now[0], crossed)
            for serial in call.carried:
                if serial in self._lately or (call.streams[serial].jitter_ms or 0) > self._near_ms:
                    yield from self._of_quality(call, crossed, serial)

    def _remember(self, up: list[Call]) -> None:
        """Keeps what was expected and lost at the last looks, of the streams that ever lost."""
        before, self._expected = self._expected, {}
        lately, self._lately = self._lately, {}
        for call in up:
            for serial in call.carried:
                stream = call.streams[serial]
                self._expected[serial] = stream.expected
                if stream.lost:
                    looks = lately.get(serial)
                    if looks is None:
                        looks = deque([(before.get(serial, 0), 0)], LATELY_LOOKS + 1)
                    looks.append((stream.expected, stream.lost))
                    self._lately[serial] = looks

    def _of_quality(self, call: Call, crossed: list[LinkPlan], serial: int) -> Iterator[Condition]:
        limits, stream = self._plan.alarms, call.streams[serial]
        link = crossed[0].name if crossed else ""
        looks = self._lately.get(serial, [(0, 0)])
        expected, lost = looks[-1][0] - looks[0][0], looks[-1][1] - looks[0][1]
        percent = 100 * max(0, lost) / expected if expected > 0 else 0.0
        worst = percent / limits.loss_percent
        text = f"{percent:.1f} % lost lately: look for a full queue or a bad line"
        if stream.jitter_ms and stream.jitter_ms / limits.jitter_ms > worst:
            worst = stream.jitter_ms / limits.jitter_ms
            text = (
                f"{stream.jitter_ms:.0f} ms jitter: voice waits behind other "
                "traffic; check its queue and marking"
            )
        if worst > BACK_WITHIN:
            sign = Sign.HOLDS if worst > 1 else Sign.NEAR
            subject = f"call {call.id} from {stream.source}"
            yield Condition(Kind.POOR_QUALITY, Severity.MINOR, link, subject, text, sign)


def as_planned(stream: StreamState, link: LinkPlan) -> bool:
    """Whether a stream's codec and packetisation are those planned for a link.

    A packetisation that is not known yet is not held against it.
    """
    planned = link.call
    return stream.codec == planned.codec.name and stream.packet_ms in (None, planned.packet_ms)


def _of_planned(call: Call, now: list[StreamState], link: LinkPlan) -> Iterator[Condition]:
    """Yields what differs from the call that was planned for the link."""
    planned = link.call
    for stream in now:
        if not as_planned(stream, link):
            seen = f"{stream.codec} {stream.packet_ms:g} ms" if stream.packet_ms else stream.codec
            text = (
                f"{seen} from {stream.source} where {planned.codec.name} {planned.packet_ms:g} ms "
                "is planned: check the codec order of this phone or gateway"
            )
            yield _of_call(Kind.UNPLANNED_CODEC, Severity.MINOR, call, link.name, text)
        if planned.dscp is not None and stream.dscp != planned.dscp:
            text = (
                f"marked {marking_name(stream.dscp)} from {stream.source} where "
                f"{marking_name(planned.dscp)} is planned: the phone does not mark, or a switch "
                "port or router strips it"
            )
            yield _of_call(Kind.WRONG_MARKING, Severity.MINOR, call, link.name, text)


def _of_one_way(call: Call, only: StreamState, crossed: list[LinkPlan]) -> Iterator[Condition]:
    """Yields a call of which one direction alone sends, where its silence is not planned."""
    if call.both_ways and any(link.call.silence_suppression for link in crossed):
        return
    text = (
        f"audio only from {only.source} to {only.destination}: look for a firewall, an address "
        "translation or a wrong media address on the way back"
    )
    yield _of_call(Kind.ONE_WAY, Severity.MAJOR, call, crossed[0].name if crossed else "", text)


def _of_call(kind: Kind, severity: Severity, call: Call, link: str, text: str) -> Condition:
    return Condition(kind, severity, link, f"call {call.id}", text)


def _blind(subject: str, text: str) -> Condition:
    return Condition(Kind.BLIND_TAP, Severity.MAJOR, "", subject, text, at_once=True)


def _of_budget(link: LinkState, way: str, state: DirectionState) -> Iterator[Condition]:
    if link.planned_calls is not None and state.calls > link.planned_calls:
        text = (
            f"{state.calls} calls where {link.planned_calls} are planned: admission lets too many "
            "in, or the plan is too small"
        )
        yield Condition(Kind.OVER_CALLS, Severity.MAJOR, link.name, way, text)
    if state.budget_kbps is None:
        return
    most = max(state.reserved_kbps, state.used_kbps)
    if most > state.budget_kbps * BACK_WITHIN:
        over = most > state.budget_kbps + DUST_KBPS
        text = (
            f"voice reserves {state.reserved_kbps:.0f} and uses {state.used_kbps:.0f} of "
            f"{state.budget_kbps:.0f} kbit/s: look for calls with a codec that was not planned, "
            "then for too many calls"
        )
        sign = Sign.HOLDS if over else Sign.NEAR
        yield Condition(Kind.OVER_BUDGET, Severity.MAJOR, link.name, way, text, sign)


def _of_capacity(link: LinkState) -> Iterator[Condition]:
    capacities = [
        direction.capacity_kbps
        for direction in (link.to_site, link.from_site)
        if direction.capacity_kbps is not None
    ]
    if link.link_kbps is None or not capacities:
        return
    full = link.link_kbps / min(capacities)
    if full > NEARLY_FULL * BACK_WITHIN:
        sign = Sign.HOLDS if full > NEARLY_FULL else Sign.NEAR
        text = (
            f"{link.link_kbps:.0f} of {min(capacities):.0f} kbit/s are taken by all traffic "
            "together: voice depends on its queue now; find out what else sends"
        )
        yield Condition(Kind.LINK_FULL, Severity.MAJOR, link.name, "all traffic", text, sign)
