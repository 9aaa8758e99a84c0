"""The immutable record that every face reads: what was promised and what is seen, at one moment.

A snapshot holds finished figures. Whoever shows one rounds and arranges; nobody computes.
All rates are kbit/s of 1000 bit/s, all times nanoseconds since 1970-01-01 UTC.
"""

from dataclasses import dataclass
from enum import StrEnum

from linkwatch.voice.figures import StreamState

__all__ = [
    "Alarm",
    "CallState",
    "CodecCount",
    "DirectionState",
    "Kind",
    "LinkState",
    "Severity",
    "Snapshot",
    "StreamState",
    "TapHealth",
]


class Severity(StrEnum):
    """How bad it is, in the words of ITU-T X.733."""

    CRITICAL = "critical"
    MAJOR = "major"
    MINOR = "minor"
    WARNING = "warning"


class Kind(StrEnum):
    """What an alarm is about."""

    OVER_BUDGET = "over-budget"
    OVER_CALLS = "over-calls"
    UNPLANNED_CODEC = "unplanned-codec"
    WRONG_MARKING = "wrong-marking"
    ONE_WAY = "one-way"
    POOR_QUALITY = "poor-quality"
    LINK_FULL = "link-full"
    BLIND_TAP = "blind-tap"
    LINK_DOWN = "link-down"


@dataclass(frozen=True, slots=True)
class Alarm:
    """An alarm that stands, or has stood.

    Attributes:
        kind: What it is about.
        severity: How bad it is.
        link: The link it concerns, or "" for the whole tap.
        subject: What it is raised on: a link and direction, a call, a stream, the tap.
        text: Cause and remedy in a sentence.
        raised: When it was raised.
        cleared: When it was cleared, or None while it stands.
    """

    kind: Kind
    severity: Severity
    link: str
    subject: str
    text: str
    raised: int
    cleared: int | None = None


@dataclass(frozen=True, slots=True)
class TapHealth:
    """How well the tap hears.

    Attributes:
        name: The port's or file's name.
        hearing: False where packets may not be read and only interface counters are known.
        packets: Frames delivered so far.
        dropped: Frames lost before they could be read.
        voice_packets: RTP packets of accepted streams so far.
        streams: RTP streams known now.
        remarks: What a reader of the figures must know, a sentence each.
    """

    name: str
    hearing: bool
    packets: int
    dropped: int
    voice_packets: int
    streams: int
    remarks: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class DirectionState:
    """One direction of a link over the last interval.

    Attributes:
        calls: Calls up that cross the link.
        reserved_kbps: Planned cost of these calls' codecs and packetisations.
        used_kbps: The voice packets really seen, each put through the link's framing.
        seen_kbps: The same packets as the frames they were on the tap.
        budget_kbps: What voice may use, or None where the plan sets no limit.
        capacity_kbps: What the link carries, or None where the plan does not say.
        reserve_kbps: The part of the budget that stays free, for emergency calls above all.
        room_calls: Planned calls that still fit beside the reserve, or None without a limit.
    """

    calls: int
    reserved_kbps: float
    used_kbps: float
    seen_kbps: float
    budget_kbps: float | None
    capacity_kbps: float | None
    reserve_kbps: float
    room_calls: int | None


@dataclass(frozen=True, slots=True)
class LinkState:
    """A link over the last interval.

    Attributes:
        name: Its name in the plan.
        framing: Its layers from the IP packet outwards, such as "crtp, ppp".
        planned_call: The planned call in words, such as "G729 20 ms".
        call_kbps: What one planned call costs on this link, one direction.
        planned_calls: Calls the plan allows, reserve included, or None without a limit.
        reserve_calls: Calls of these that stay free, for emergency calls above all.
        fit_beside_load: Planned calls that would fit beside all present traffic by the interface
            counters, or None where the counters or the capacity are not known.
        directions_known: False where the plan gives no site prefixes: then all streams count, and
            which direction is which is not known.
        link_kbps: All traffic in the busier direction by the interface counters, or None.
        to_site: Towards the site.
        from_site: Away from the site.
    """

    name: str
    framing: str
    planned_call: str
    call_kbps: float
    planned_calls: int | None
    reserve_calls: int
    fit_beside_load: int | None
    directions_known: bool
    link_kbps: float | None
    to_site: DirectionState
    from_site: DirectionState


@dataclass(frozen=True, slots=True)
class CallState:
    """A call as it stands: one or two streams between two pairs of addresses and ports.

    Attributes:
        id: Its number, from 1 in the order in which calls were found.
        up: Whether it is up now.
        start, end: When its first and its last packet were seen.
        here, there: Its ends, address and port; `here` is the end at the site where that is known.
        both_ways: Whether packets were heard in both directions.
        crosses: Names of the links it crosses.
        codec: The codec to the site and from it: one name, or two with "/" where they differ.
        as_planned: Whether codec and packetisation are those planned for the links it crosses.
        packet_ms: Packetisation, or None while it is not known.
        reserved_kbps: What admission counts for it on the first link it crosses, one direction.
        used_kbps: What it really took there in the last interval, the busier direction; for a call
            that has ended, over its lifetime.
        loss_percent: The worse direction's.
        jitter_ms: The worse direction's, or None.
        dscp: The marking, the worse direction's where they differ.
        marking_right: Whether every stream is marked as planned.
        mos: Estimated listening quality, or None where it is not estimated.
        conversation: The first call of its conversation: a relayed or moved leg shares it.
        streams: Its streams.
    """

    id: int
    up: bool
    start: int
    end: int
    here: str
    there: str
    both_ways: bool
    crosses: tuple[str, ...]
    codec: str
    as_planned: bool
    packet_ms: float | None
    reserved_kbps: float
    used_kbps: float
    loss_percent: float
    jitter_ms: float | None
    dscp: int
    marking_right: bool
    mos: float | None
    conversation: int
    streams: tuple[StreamState, ...]


@dataclass(frozen=True, slots=True)
class CodecCount:
    """How many calls that are up use a codec.

    Attributes:
        codec: The codec to the site and from it: one name, or two with "/" where they differ.
        packet_ms: Packetisation, or None while it is not known.
        calls: How many.
    """

    codec: str
    packet_ms: float | None
    calls: int


@dataclass(frozen=True, slots=True)
class Snapshot:
    """Everything known at one moment.

    Attributes:
        time: The moment, by the frames' own time.
        interval_s: The seconds before it that the rates cover.
        site: The plan's site.
        tap: How well the tap hears.
        links: The plan's links.
        calls_up: Calls up now on any link.
        elsewhere_up: Calls up now that cross no link of the plan.
        calls: The calls that are up, and those that ended a short while ago.
        alarms: The alarms that stand, worst first.
        cleared: The alarms cleared a short while ago, latest first.
        codecs: The codecs of the calls that are up, the most used first.
    """

    time: int
    interval_s: float
    site: str
    tap: TapHealth
    links: tuple[LinkState, ...]
    calls_up: int
    elsewhere_up: int
    calls: tuple[CallState, ...]
    alarms: tuple[Alarm, ...]
    cleared: tuple[Alarm, ...]
    codecs: tuple[CodecCount, ...] = ()
