"""A call as faces show it."""

from linkwatch.plan.planfile import Plan
from linkwatch.voice.calls import Call
from linkwatch.voice.figures import StreamState
from linkwatch.voice.names import address_text, end_text
from linkwatch.watch.crossing import TO_SITE, Crossings
from linkwatch.watch.judge import as_planned
from linkwatch.watch.ledger import Ledger
from linkwatch.watch.snapshot import CallState


def call_state(
    call: Call, plan: Plan, crossings: Crossings, ledger: Ledger, interval_s: float
) -> CallState:
    """Returns a call as it stands, with what it used over the last interval."""
    ways = crossings.of(call)
    crossed = [index for index, way in enumerate(ways) if way]
    first = crossed[0] if crossed else 0
    link = plan.links[first]
    # The stream in the forward direction goes away from the first end.
    here, there = call.ends if ways[first] != TO_SITE else call.ends[::-1]
    now = [stream for stream in call.speaking if stream]
    jitters = [stream.jitter_ms for stream in now if stream.jitter_ms is not None]
    wrong = [s.dscp for s in now if link.call.dscp is not None and s.dscp != link.call.dscp]
    return CallState(
        id=call.id,
        up=call.up,
        start=call.start,
        end=call.end,
        here=end_text(address_text(here[0]), here[1]),
        there=end_text(address_text(there[0]), there[1]),
        both_ways=call.both_ways,
        crosses=tuple(plan.links[index].name for index in crossed),
        codec=codec_of(call),
        as_planned=not crossed or not plan.given or all(as_planned(s, link) for s in now),
        packet_ms=packet_ms_of(call),
        reserved_kbps=max(ledger.reserved_kbps(call, first, way) for way in (True, False)),
        used_kbps=_used_kbps(call, first, now, interval_s),
        loss_percent=max(stream.loss_percent for stream in now),
        jitter_ms=max(jitters, default=None),
        dscp=wrong[0] if wrong else now[0].dscp,
        marking_right=not wrong or not crossed,
        mos=None,
        conversation=call.conversation,
        streams=tuple(call.streams.values()),
    )


def codec_of(call: Call) -> str:
    """Returns the codec of a call, or both with "/" where the directions differ."""
    return "/".join(dict.fromkeys(stream.codec for stream in call.speaking if stream))


def packet_ms_of(call: Call) -> float | None:
    """Returns the packetisation of a call, by the direction that was heard first."""
    return next((stream.packet_ms for stream in call.speaking if stream), None)


def _used_kbps(call: Call, link: int, now: list[StreamState], interval_s: float) -> float:
    """Returns what the busier direction took in the interval; after the end, over its lifetime."""
    if not call.up:
        return max(stream.link_kbps for stream in now)
    octets = {True: 0.0, False: 0.0}
    for serial, carried in call.carried.items():
        octets[serial in call.forward] += carried.link_octets[link]
    return max(octets.values()) * 8 / 1000 / interval_s
