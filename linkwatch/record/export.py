"""Snapshots, streams, calls and alarms as JSON, by the keys of docs/json.md."""

from collections.abc import Mapping, Sequence
from typing import Any, TypeAlias

from linkwatch.watch.snapshot import (
    Alarm,
    CallState,
    DirectionState,
    LinkState,
    Snapshot,
    StreamState,
)

Json: TypeAlias = dict[str, Any]


def seconds(time: int) -> float:
    """Returns a time in seconds since 1970-01-01 UTC, to the microsecond."""
    return round(time / 1e9, 6)


def kbps(rate: float) -> float:
    """Returns a rate in kbit/s to a tenth of a bit a second, so that sums show no dust."""
    return round(rate, 4)


def snapshot_json(snapshot: Snapshot) -> Json:
    """Returns a snapshot without its calls, as `linkwatch log --json` has it."""
    return {
        "time": seconds(snapshot.time),
        "interval_s": snapshot.interval_s,
        "site": snapshot.site,
        "tap": {
            "name": snapshot.tap.name,
            "hearing": snapshot.tap.hearing,
            "packets": snapshot.tap.packets,
            "dropped": snapshot.tap.dropped,
            "voice_packets": snapshot.tap.voice_packets,
            "streams": snapshot.tap.streams,
            "remarks": list(snapshot.tap.remarks),
        },
        "links": [_link_json(link) for link in snapshot.links],
        "calls_up": snapshot.calls_up,
        "elsewhere_up": snapshot.elsewhere_up,
        "codecs": [
            {"codec": used.codec, "packet_ms": used.packet_ms, "calls": used.calls}
            for used in snapshot.codecs
        ],
        "alarms": [alarm_json(alarm) for alarm in snapshot.alarms],
    }


def _link_json(link: LinkState) -> Json:
    return {
        "name": link.name,
        "framing": link.framing,
        "planned_call": link.planned_call,
        "call_kbps": kbps(link.call_kbps),
        "planned_calls": link.planned_calls,
        "reserve_calls": link.reserve_calls,
        "directions_known": link.directions_known,
        "to_site": _direction_json(link.to_site),
        "from_site": _direction_json(link.from_site),
        "link_kbps": _maybe(link.link_kbps),
        "fit_beside_load": link.fit_beside_load,
    }


def _direction_json(direction: DirectionState) -> Json:
    return {
        "calls": direction.calls,
        "reserved_kbps": kbps(direction.reserved_kbps),
        "used_kbps": kbps(direction.used_kbps),
        "seen_kbps": kbps(direction.seen_kbps),
        "budget_kbps": _maybe(direction.budget_kbps),
        "capacity_kbps": _maybe(direction.capacity_kbps),
        "reserve_kbps": kbps(direction.reserve_kbps),
        "room_calls": direction.room_calls,
    }


def _maybe(rate: float | None) -> float | None:
    return None if rate is None else kbps(rate)


def alarm_json(alarm: Alarm) -> Json:
    """Returns an alarm."""
    return {
        "kind": str(alarm.kind),
        "severity": str(alarm.severity),
        "link": alarm.link,
        "raised": seconds(alarm.raised),
        "cleared": None if alarm.cleared is None else seconds(alarm.cleared),
        "subject": alarm.subject,
        "text": alarm.text,
    }


def stream_json(stream: StreamState) -> Json:
    """Returns a stream."""
    source, source_port = stream.source.rsplit(":", 1)
    destination, destination_port = stream.destination.rsplit(":", 1)
    return {
        "src": source.strip("[]"),
        "src_port": int(source_port),
        "dst": destination.strip("[]"),
        "dst_port": int(destination_port),
        "ssrc": stream.ssrc,
        "payload_type": stream.payload_type,
        "media": stream.media,
        "codec": stream.codec,
        "codec_evidence": stream.codec_evidence,
        "packet_ms": stream.packet_ms,
        "packets": stream.packets,
        "expected": stream.expected,
        "lost": stream.lost,
        "lost_a3": stream.lost_a3,
        "duplicates": stream.duplicates,
        "reordered": stream.reordered,
        "jitter_ms": _ms(stream.jitter_ms),
        "jitter_mean_ms": _ms(stream.jitter_mean_ms),
        "jitter_max_ms": _ms(stream.jitter_max_ms),
        "dscp": stream.dscp,
        "dscp_steady": stream.dscp_steady,
        "first": seconds(stream.first),
        "last": seconds(stream.last),
        "ip_octets": stream.ip_octets,
        "link_octets": stream.link_octets,
        "link_kbps": kbps(stream.link_kbps),
    }


def _ms(jitter: float | None) -> float | None:
    return None if jitter is None else round(jitter, 6)


def call_json(call: CallState, streams: Sequence[int]) -> Json:
    """Returns a call; `streams` are the indexes of its streams in the list beside it."""
    return {
        "id": call.id,
        "streams": list(streams),
        "both_ways": call.both_ways,
        "start": seconds(call.start),
        "end": seconds(call.end),
        "crosses": list(call.crosses),
        "codec": call.codec,
        "packet_ms": call.packet_ms,
        "reserved_kbps": kbps(call.reserved_kbps),
        "used_kbps": kbps(call.used_kbps),
        "loss_percent": round(call.loss_percent, 4),
        "jitter_ms": _ms(call.jitter_ms),
        "dscp": call.dscp,
        "mos": call.mos,
    }


def reading_json(
    packets: int,
    streams: Mapping[int, StreamState],
    calls: Sequence[CallState],
    most: tuple[int, int],
    alarms: Sequence[Alarm],
    snapshots: Sequence[Json],
    remarks: Sequence[str],
) -> Json:
    """Returns what `linkwatch read --json` answers.

    Args:
        packets: Frames read.
        streams: All streams by serial number.
        calls: All calls.
        most: The most calls, and the most conversations, at once.
        alarms: All alarms.
        snapshots: The snapshots, already as JSON.
        remarks: What a reader of the figures must know.
    """
    listed = list(streams.values())
    index = {_identity(stream): i for i, stream in enumerate(listed)}
    return {
        "packets": packets,
        "streams": [stream_json(stream) for stream in listed],
        "calls": [
            call_json(call, [index[_identity(stream)] for stream in call.streams]) for call in calls
        ],
        "peak_calls": most[0],
        "conversations": len({call.conversation for call in calls}),
        "peak_conversations": most[1],
        "alarms": [alarm_json(alarm) for alarm in alarms],
        "snapshots": list(snapshots),
        "remarks": list(remarks),
    }


def _identity(stream: StreamState) -> tuple[str, str, int, int]:
    return stream.source, stream.destination, stream.ssrc, stream.first


def count_json(snapshot: Snapshot) -> Json:
    """Returns what `linkwatch count --json` answers: the link with least room decides."""
    rooms = [
        direction.room_calls
        for link in snapshot.links
        for direction in (link.to_site, link.from_site)
        if direction.room_calls is not None
    ]
    planned = [link.planned_calls for link in snapshot.links if link.planned_calls is not None]
    return {
        "calls_up": snapshot.calls_up,
        "planned_calls": sum(planned) if planned else None,
        "room_calls": min(rooms) if rooms else None,
        "time": seconds(snapshot.time),
        "links": [
            {
                "name": link.name,
                "calls_up": max(link.to_site.calls, link.from_site.calls),
                "planned_calls": link.planned_calls,
                "room_calls": min(
                    (
                        direction.room_calls
                        for direction in (link.to_site, link.from_site)
                        if direction.room_calls is not None
                    ),
                    default=None,
                ),
            }
            for link in snapshot.links
        ],
    }
