"""Builders of snapshots with sane defaults, and a feed that a test speaks for."""

from collections.abc import Callable
from types import SimpleNamespace

import pytest

from linkwatch.watch.snapshot import (
    Alarm,
    CallState,
    DirectionState,
    Kind,
    LinkState,
    Severity,
    Snapshot,
    StreamState,
    TapHealth,
)

SECOND = 1_000_000_000
NOW = 1_700_000_000 * SECOND
PLANNED_KBPS = 27.5  # a place of the default budget: 660 kbit/s for 24 calls


def a_stream(source="10.20.1.7:16384", destination="10.30.0.9:20000", **other):
    """Returns a stream in good health."""
    values = {
        "source": source, "destination": destination, "ssrc": 0x1234ABCD, "payload_type": 18,
        "media": "audio", "codec": "G729", "codec_evidence": "static", "packet_ms": 20.0,
        "packets": 1500, "expected": 1503, "lost": 3, "lost_a3": 2, "duplicates": 1, "reordered": 4,
        "jitter_ms": 2.1, "jitter_mean_ms": 1.8, "jitter_max_ms": 9.4, "dscp": 46,
        "dscp_steady": True, "first": NOW - 30 * SECOND, "last": NOW, "ip_octets": 90_000,
        "link_octets": 99_000.0, "link_kbps": 26.4, "active": True,
    }  # fmt: skip
    return StreamState(**(values | other))


def a_call(number=1, **other):
    """Returns a call that is up, as planned."""
    here, there = (
        f"10.20.1.{number % 250 + 1}:{16384 + 2 * (number % 8000)}",
        f"10.30.0.9:{20000 + number}",
    )
    values = {
        "id": number, "up": True, "start": NOW - (30 + number) * SECOND, "end": NOW, "here": here,
        "there": there, "both_ways": True, "crosses": ("wan",), "codec": "G729",
        "as_planned": True, "packet_ms": 20.0, "reserved_kbps": 26.4, "used_kbps": 26.4,
        "loss_percent": 0.2, "jitter_ms": 2.1, "dscp": 46, "marking_right": True, "mos": 3.9,
        "conversation": number,
        "streams": (a_stream(here, there), a_stream(there, here)),
    }  # fmt: skip
    return CallState(**(values | other))


def a_direction(calls=19, **other):
    """Returns a direction in which so many planned calls are up."""
    values = {
        "calls": calls, "reserved_kbps": PLANNED_KBPS * calls, "used_kbps": 25.0 * calls,
        "seen_kbps": 31.0 * calls, "budget_kbps": 660.0, "capacity_kbps": 2048.0,
        "reserve_kbps": 2 * PLANNED_KBPS, "room_calls": 22 - calls,
    }  # fmt: skip
    return DirectionState(**(values | other))


def a_link(name="wan", calls=19, to_site=None, from_site=None, **other):
    """Returns a link of 24 planned calls, 2 of them kept in reserve."""
    values = {
        "name": name, "framing": "crtp, ppp", "planned_call": "G729 20 ms",
        "call_kbps": PLANNED_KBPS, "planned_calls": 24, "reserve_calls": 2, "fit_beside_load": None,
        "directions_known": True, "link_kbps": None, "to_site": to_site or a_direction(calls),
        "from_site": from_site or a_direction(calls),
    }  # fmt: skip
    return LinkState(**(values | other))


def a_link_without_limit(**other):
    """Returns a link for which the plan sets no limit."""
    way = a_direction(5, budget_kbps=None, capacity_kbps=None, reserve_kbps=0.0, room_calls=None)
    values = {"planned_calls": None, "reserve_calls": 0, "to_site": way, "from_site": way}
    return a_link(**(values | other))


def an_alarm(kind=Kind.ONE_WAY, severity=Severity.MAJOR, subject="call 2", **other):
    """Returns an alarm raised a minute ago."""
    text = "audio only from 10.20.1.3 to 10.30.0.9: look for a firewall on the way back"
    values = {"link": "wan", "text": text, "raised": NOW - 60 * SECOND}
    return Alarm(kind=kind, severity=severity, subject=subject, **(values | other))


def a_tap(**other):
    """Returns the health of a tap that hears well."""
    values = {
        "name": "eth1", "hearing": True, "packets": 123_456, "dropped": 0,
        "voice_packets": 98_765, "streams": 38,
    }  # fmt: skip
    return TapHealth(**(values | other))


def a_snapshot(up=19, **other):
    """Returns a snapshot of an invented depot whose one link carries so many planned calls."""
    values = {
        "time": NOW, "interval_s": 1.0, "site": "Kiln Lane depot", "tap": a_tap(),
        "links": (a_link(calls=up),), "calls_up": up, "elsewhere_up": 0,
        "calls": tuple(a_call(n + 1) for n in range(up)), "alarms": (), "cleared": (),
    }  # fmt: skip
    return Snapshot(**(values | other))


def counters_only(**other):
    """Returns a snapshot of a tap whose packets may not be read."""
    remark = "reading packets is not allowed; run as root, or grant cap_net_raw to the interpreter"
    tap = a_tap(hearing=False, packets=0, voice_packets=0, streams=0, remarks=(remark,))
    link = a_link(calls=0, link_kbps=1400.0, fit_beside_load=23)
    values = {"tap": tap, "links": (link,)}
    return a_snapshot(0, **(values | other))


class FeedByHand:
    """A feed that publishes what a test hands it."""

    def __init__(self):
        self.publish = self.finished = None
        self.stops = 0

    def start(self, publish: Callable, finished: Callable) -> None:
        """Keeps where to publish."""
        self.publish, self.finished = publish, finished

    def stop(self) -> None:
        """Counts that it was stopped."""
        self.stops += 1


@pytest.fixture(scope="session")
def make():
    """Gives the builders by name."""
    return SimpleNamespace(
        alarm=an_alarm, call=a_call, counters_only=counters_only, direction=a_direction,
        link=a_link, link_without_limit=a_link_without_limit, snapshot=a_snapshot,
        stream=a_stream, tap=a_tap,
    )  # fmt: skip


@pytest.fixture
def feed():
    """Gives a feed that a test speaks for."""
    return FeedByHand()
