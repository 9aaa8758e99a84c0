"""The monitor: batches in, snapshots out; ledger, judge and alarms together."""

import itertools

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from wirebuild import GATEWAY, MS, START_NS, batch, both_ways, speech

from linkwatch.frames import CounterReading, LinkType, TapStatistics, silence
from linkwatch.plan.planfile import default_plan, parse_plan
from linkwatch.watch.monitor import Monitor

SECOND = 10**9
PLAN = """
site: Kiln Lane depot
links:
  - name: wan
    capacity_kbps: 1000
    framing: [ethernet]
    site_prefixes: [10.20.0.0/16]
    budget: {calls: 4, kbps: 130, reserve_calls: 1}
    call: {codec: G729, packet_ms: 20, marking: EF}
alarms: {loss_percent: 1.0, jitter_ms: 30, hold_seconds: 2}
"""


def planned(**changes):
    text = PLAN
    for old, new in changes.values():
        assert old in text
        text = text.replace(old, new)
    return parse_plan(text, "test plan")


def watched(frames, plan=None, *, cuts=(), readings=None, tap=None, quiet_s=0, **options):
    """Returns the monitor and its snapshots after these frames, and a silence after them."""
    monitor = Monitor(plan or planned(), "test", keep_all=True, **options)
    snapshots = []
    edges = [0, *sorted(cuts), len(frames)]
    for start, stop in itertools.pairwise(edges):
        if stop > start:
            piece = batch(frames[start:stop])
            snapshots += monitor.feed(piece, tap or TapStatistics(), None)
    end = frames[-1][0] if frames else START_NS
    for second in range(1, quiet_s + 1):
        quiet = silence(LinkType.ETHERNET, end + second * SECOND)
        reading = readings[second - 1] if readings else None
        snapshots += monitor.feed(quiet, tap or TapStatistics(), reading)
    snapshots += monitor.finish(tap or TapStatistics())
    return monitor, snapshots


def g729(phone=7, **speech_of):
    speech_of = {"pt": 18, "payload": 20, "packets": 500} | speech_of
    return both_ways(f"10.20.1.{phone}", GATEWAY, (16384, 20000 + 2 * phone), **speech_of)


def together(*calls):
    return sorted((frame for call in calls for frame in call), key=lambda frame: frame[0])


def kinds(monitor):
    return sorted({str(alarm.kind) for alarm in monitor.alarms()})


def test_a_planned_call_reserves_and_uses_what_was_promised():
    """Promised and seen are equal to the last bit for a call that keeps to the plan."""
    monitor, snapshots = watched(g729())
    wan = snapshots[3].links[0]
    # 20 payload + 40 headers + 18 Ethernet = 78 octets, 50 a second: 31.2 kbit/s (computed from
    # RFC 3551 4.5.6, RFC 3550, RFC 768, RFC 791 and IEEE 802.3 sizes).
    for direction in (wan.to_site, wan.from_site):
        assert direction.calls == 1
        assert direction.reserved_kbps == pytest.approx(31.2)
        assert direction.used_kbps == pytest.approx(31.2)
    assert kinds(monitor) == []


def test_room_is_what_the_smaller_limit_leaves_beside_the_reserve():
    """Four calls, 130 kbit/s, one reserved: two calls up leave room for one more."""
    _, snapshots = watched(together(g729(7), g729(8)))
    assert [d.room_calls for d in (snapshots[3].links[0].to_site, snapshots[3].links[0].from_site)]
    assert snapshots[3].links[0].to_site.room_calls == 1
    assert snapshots[3].calls_up == 2


def test_a_dearer_codec_takes_the_room_of_several():
    """One PCMU call on a G729 plan costs 87.2 kbit/s, leaves less room, and is told."""
    monitor, snapshots = watched(g729(pt=0, payload=160))
    wan = snapshots[3].links[0]
    assert wan.to_site.reserved_kbps == pytest.approx(87.2)
    assert wan.to_site.room_calls == 0
    assert kinds(monitor) == ["unplanned-codec"]


def test_voice_over_the_budget_raises_an_alarm_and_clears_it():
    """Two PCMU calls exceed 130 kbit/s; after their end the alarm clears."""
    frames = together(g729(7, pt=0, payload=160), g729(8, pt=0, payload=160))
    monitor, _ = watched(frames, quiet_s=20)
    over = [alarm for alarm in monitor.alarms() if alarm.kind == "over-budget"]
    assert {alarm.subject for alarm in over} == {"to site", "from site"}
    assert all(alarm.cleared and alarm.cleared > alarm.raised for alarm in over)


def test_more_calls_than_planned_raise_an_alarm():
    """The fifth call on a plan of four is one too many, though the kbit/s would do."""
    plan = planned(roomy=("kbps: 130", "kbps: 900"))
    monitor, _ = watched(together(*(g729(phone) for phone in range(5))), plan)
    assert "over-calls" in kinds(monitor)


def test_a_missing_mark_is_told():
    """A stream whose mark is not the planned one raises an alarm with the cause."""
    monitor, _ = watched(g729(dscp=0))
    assert kinds(monitor) == ["wrong-marking"]
    assert "EF is planned" in monitor.alarms()[0].text


def test_one_way_audio_is_told():
    """A call of which one direction only is heard raises an alarm."""
    frames = speech(pt=18, payload=20, packets=500)
    monitor, snapshots = watched(frames)
    assert "one-way" in kinds(monitor)
    # The silent direction may speak at any time: admission counts it.
    assert snapshots[3].links[0].to_site.reserved_kbps == pytest.approx(31.2)
    assert snapshots[3].links[0].to_site.used_kbps == 0


def test_loss_is_judged_on_the_last_seconds():
    """A burst of loss raises an alarm while it lasts, and does not colour the whole call."""
    frames = g729(packets=1500, lose=set(range(300, 700, 10)))
    monitor, _ = watched(frames)
    (alarm, *_) = [a for a in monitor.alarms() if a.kind == "poor-quality"]
    assert alarm.cleared is not None


def test_a_call_within_the_site_is_shown_and_not_counted():
    """Between two desks no link is crossed."""
    frames = both_ways("10.20.1.7", "10.20.1.8", pt=18, payload=20, packets=200)
    monitor, snapshots = watched(frames)
    assert (snapshots[2].calls_up, snapshots[2].elsewhere_up) == (0, 1)
    assert snapshots[2].links[0].to_site.used_kbps == 0
    assert monitor.calls()[0].crosses == ()


def test_without_prefixes_everything_counts_and_it_is_said():
    """No plan: all streams count, the directions are not known, nothing is judged."""
    monitor, snapshots = watched(g729(pt=0, payload=160, dscp=0), default_plan())
    link = snapshots[3].links[0]
    assert (link.directions_known, link.to_site.calls, link.to_site.room_calls) == (False, 1, None)
    assert kinds(monitor) == []


def test_dropped_frames_make_the_tap_blind():
    """Frames that the kernel dropped are told at once."""
    monitor, _ = watched(g729(), tap=TapStatistics(frames=900, dropped=12))
    assert kinds(monitor) == ["blind-tap"]


def counters(second, octets=0, up=True):
    time = START_NS + 10 * SECOND + second * SECOND
    return CounterReading(time, received=second * octets, sent=0, up=up)


def test_a_full_link_is_told_and_leaves_no_room():
    """Counters near the capacity raise link-full; the calls that would fit are none."""
    readings = [counters(second, octets=124_000) for second in range(1, 11)]
    monitor, snapshots = watched(g729(packets=50), quiet_s=10, readings=readings)
    assert "link-full" in kinds(monitor)
    assert snapshots[-3].links[0].link_kbps == pytest.approx(992)
    assert snapshots[-3].links[0].fit_beside_load == 0


def test_a_port_that_goes_down_is_told_at_once():
    """A port without a link is critical."""
    readings = [counters(1), counters(2, up=False)]
    monitor, _ = watched(g729(packets=50), quiet_s=2, readings=readings)
    (alarm,) = [alarm for alarm in monitor.alarms() if alarm.kind == "link-down"]
    assert alarm.severity == "critical"


def test_a_port_on_which_nothing_is_heard_is_told():
    """A live port without a single frame for a while is not believed to be quiet."""
    readings = [counters(second) for second in range(1, 20)]
    monitor, _ = watched(g729(packets=50), quiet_s=19, readings=readings)
    assert "blind-tap" in kinds(monitor)


def test_every_octet_of_a_call_is_in_some_snapshot():
    """Summed over all snapshots, what was used is every packet through the framing."""
    frames = g729(packets=321, lose={5})
    _, snapshots = watched(frames)
    for way in ("to_site", "from_site"):
        total = sum(getattr(s.links[0], way).used_kbps * s.interval_s for s in snapshots)
        assert total * 1000 / 8 == pytest.approx(320 * 78)


@settings(max_examples=25)
@given(cuts=st.sets(st.integers(1, 600), max_size=10))
def test_snapshots_are_the_same_however_the_frames_come(cuts):
    """A capture read in one piece has the alarms and figures of the live batches."""
    frames = together(g729(7, packets=200), g729(8, packets=160, pt=0, payload=160, dscp=0))
    _, whole = watched(frames)
    _, cut = watched(frames, cuts=cuts)
    assert [s.links for s in whole] == [s.links for s in cut]
    assert [s.alarms for s in whole] == [s.alarms for s in cut]


def test_a_long_silence_in_a_capture_is_passed_over():
    """An hour without frames does not make an hour of snapshots; time goes on after it."""
    later = g729(8, start_ns=START_NS + 3600 * SECOND)
    monitor, snapshots = watched(g729(7) + later)
    assert len(snapshots) < 200
    assert [call.id for call in monitor.calls()] == [1, 2]
    assert monitor.most_calls() == (1, 1)


def test_a_clock_set_back_is_followed():
    """After the clock steps back an hour there are snapshots again at once."""
    monitor, _ = watched(g729(7))
    back = g729(8, start_ns=START_NS - 3600 * SECOND, packets=100)
    assert len(list(monitor.feed(batch(back), TapStatistics(), None))) >= 1


def test_a_leg_that_moves_is_another_call_and_the_same_conversation():
    """The same SSRC on other ports goes on with the conversation."""
    there = g729(7, packets=100)
    moved = both_ways(
        "10.20.1.9", GATEWAY, (4000, 4002), pt=18, payload=20, packets=100,
        start_ns=START_NS + 2100 * MS, first_sequence=200,
    )  # fmt: skip
    monitor, _ = watched(there + moved)
    calls = monitor.calls()
    assert len(calls) == 2
    assert len({call.conversation for call in calls}) == 1
