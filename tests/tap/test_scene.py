"""The built-in scene: the story it promises is the one that is found in its frames."""

from collections import Counter
from itertools import pairwise
from math import ceil
from types import SimpleNamespace

import dpkt
import pytest

from linkwatch.frames import LinkType
from linkwatch.plan.planfile import parse_plan
from linkwatch.tap import story
from linkwatch.tap.scene import LONGEST_DELAY_MS, START_NS, Scene, scene_plan_text
from linkwatch.watch.monitor import Monitor

SECOND_NS = 10**9
EARLY_S = 40
UNPLANNED, UNMARKED, ONE_WAY = (
    next(call for call in story.TOLD if words in call.name)
    for words in ("codec nobody planned", "does not mark", "none comes back")
)
DESK_TO_DESK = next(call for call in story.TOLD if call.within)


def frames(scene, until_s=None):
    """Returns [(time, octets)] of the scene, the whole of it or up to a second of it."""
    got = []
    for batch in scene.batches():
        for at, kept, whole, seen in zip(
            batch.offsets, batch.captured, batch.original, batch.times, strict=True
        ):
            assert kept == whole
            got.append((int(seen), bytes(batch.octets[at : at + kept])))
        if until_s is not None and batch.until >= START_NS + until_s * SECOND_NS:
            scene.close()
    return got


@pytest.fixture(scope="module")
def whole():
    """The whole scene, held against its own plan by the monitor."""
    scene = Scene()
    plan = parse_plan(scene_plan_text(), "scene.yaml")
    monitor = Monitor(plan, scene.name, keep_all=True, with_calls=False)
    snapshots, counters = [], []
    for batch in scene.batches():
        counters.append(scene.counters())
        snapshots += monitor.feed(batch, scene.statistics(), counters[-1])
    snapshots += monitor.finish(scene.statistics())
    return SimpleNamespace(
        calls=monitor.calls(),
        alarms=monitor.alarms(),
        snapshots=snapshots,
        counters=counters,
        statistics=scene.statistics(),
    )


@pytest.fixture(scope="module")
def early():
    """The datagrams of the first seconds, decoded by scapy, by the flow they belong to."""
    from scapy.layers.inet import IP, UDP
    from scapy.layers.l2 import Ether

    datagrams = {}
    for _, octets in frames(Scene(), EARLY_S):
        packet = Ether(octets)[IP]
        udp = packet[UDP]
        key = (packet.src, udp.sport), (packet.dst, udp.dport)
        datagrams.setdefault(key, []).append((packet, bytes(udp.payload)))
    return datagrams


def spoken(early, flow):
    """Returns [(IP packet, RTP packet)] of a flow by scapy, in the order of their numbers."""
    from scapy.layers.rtp import RTP

    decoded = [(packet, RTP(content)) for packet, content in early[flow.source, flow.destination]]
    own = [(packet, rtp) for packet, rtp in decoded if rtp.payload_type == flow.payload_type]
    return sorted(own, key=lambda pair: (pair[1].sequence - flow.first_sequence) % 2**16)


def found(whole, call):
    """Returns the one call that was found for a call of the story."""
    prefix = story.SITE_IPV6 if call.ipv6 else story.SITE
    phone, port = prefix.format(call.phone), 16384 + 2 * call.phone
    name = f"[{phone}]:{port}" if call.ipv6 else f"{phone}:{port}"
    # From desk to desk either end is at the site.
    (one,) = (seen for seen in whole.calls if name in (seen.here, seen.there))
    return one


def test_the_same_seed_tells_the_same_frames_and_another_seed_others():
    """A scene can be shown again, octet by octet."""
    first = frames(Scene(), EARLY_S)
    assert first == frames(Scene(), EARLY_S)
    assert first != frames(Scene(seed=8), EARLY_S)


@pytest.mark.parametrize(("made_ms", "batch_ms"), [(100, 50), (20_000, 4000)])
def test_the_scene_is_the_same_however_it_is_cut(monkeypatch, made_ms, batch_ms):
    """Where batches end moves, adds and loses no frame, in calm and in bad stretches."""
    monkeypatch.setattr("linkwatch.tap.story.LENGTH_S", 200)
    usual = frames(Scene())
    monkeypatch.setattr("linkwatch.tap.scene.MADE_MS", made_ms)
    monkeypatch.setattr("linkwatch.tap.scene.BATCH_MS", batch_ms)
    assert frames(Scene()) == usual


def test_frames_come_in_the_order_of_time_within_what_their_batch_promises():
    """No frame is older than the batch before it, or newer than its own."""
    scene, before = Scene(), START_NS
    for batch in scene.batches():
        assert batch.link_type is LinkType.ETHERNET
        if len(batch):
            assert before <= batch.times[0]
            assert batch.times[-1] < batch.until
            assert (batch.times[1:] >= batch.times[:-1]).all()
        before = batch.until
    assert before == START_NS + story.LENGTH_S * SECOND_NS


@pytest.mark.parametrize("from_s", [0, 132])
def test_every_frame_is_sound_by_another_decoder(from_s):
    """By dpkt: Ethernet, a VLAN tag, IP and UDP, whose lengths agree to the octet."""
    begin, end = (START_NS + s * SECOND_NS for s in (from_s, from_s + EARLY_S))
    versions = Counter()
    for time, octets in frames(Scene(), from_s + EARLY_S):
        if not begin <= time < end:
            continue
        frame = dpkt.ethernet.Ethernet(octets)
        packet = frame.data
        assert [tag.id for tag in frame.vlan_tags] == [20]
        head = 14 + 4
        if isinstance(packet, dpkt.ip.IP):
            assert packet.len == len(octets) - head
            head += 20
        else:
            assert isinstance(packet, dpkt.ip6.IP6)
            assert packet.plen == len(octets) - head - 40
            head += 40
        assert packet.p == dpkt.ip.IP_PROTO_UDP
        assert packet.data.ulen == len(octets) - head
        versions[packet.v] += 1
    assert versions[4]
    assert bool(versions[6]) == (from_s > 0)


def test_every_packet_of_a_stream_is_the_one_its_row_promises(early):
    """By scapy: numbers, timestamps, source and marking go on as RTP's do, and no octet is off."""
    told = [
        flow
        for flow in story.flows(7)
        if flow.payload_type in (story.G729, story.PCMU) and flow.start_s < EARLY_S - 5
    ]
    assert {flow.payload_type for flow in told} == {story.G729, story.PCMU}
    for flow in told:
        numbers = set()
        for packet, rtp in spoken(early, flow):
            number = (rtp.sequence - flow.first_sequence) % 2**16
            numbers.add(number)
            ticks = (flow.first_timestamp + number * story.TICKS) % 2**32
            assert (rtp.timestamp, rtp.sourcesync) == (ticks, flow.ssrc)
            assert packet.tos >> 2 == flow.dscp
            # RFC 3551 table 1 and 4.5.6: 20 ms are 160 octets of PCMU, 20 of G729.
            assert packet.len == 20 + 8 + 12 + {story.PCMU: 160, story.G729: 20}[flow.payload_type]
            assert rtp.marker == 0  # RFC 3551 4.1: nobody here suppresses silence
        settled_s = EARLY_S - LONGEST_DELAY_MS / 1000 - flow.start_s
        paused = flow.pause_s or (0, 0)
        silent = {n for n in range(max(numbers)) if is_within(flow, n, paused)}
        assert numbers == set(range(max(numbers) + 1)) - silent
        assert max(numbers) * story.PACKET_MS / 1000 > settled_s - 0.02


def is_within(flow, number, stretch):
    """Returns whether a packet of a flow is due in a stretch of seconds."""
    due_s = flow.start_s + number * story.PACKET_MS / 1000
    return stretch[0] <= round(due_s, 6) < stretch[1]


def test_a_pressed_key_is_told_as_telephone_events_are(early):
    """By scapy: one timestamp, a marker at its beginning, a growing duration, its end thrice."""
    (flow,) = (flow for flow in story.flows(7) if flow.payload_type == story.EVENT)
    events = [rtp for _, rtp in spoken(early, flow)]
    first = round((flow.only_s[0] - flow.start_s) * 1000 / story.PACKET_MS)
    assert len({rtp.sequence for rtp in events}) == 20  # 0.4 s of 20 ms
    # RFC 4733 2.2: the timestamp is that of the beginning, where alone the marker stands.
    begun = (flow.first_timestamp + first * story.TICKS) % 2**32
    assert {rtp.timestamp for rtp in events} == {begun}
    assert [rtp.marker for rtp in events] == [1] + [0] * (len(events) - 1)
    # RFC 4733 2.3: event, then end, reserved and volume in one octet, then the duration.
    told = [bytes(rtp.payload) for rtp in events]
    assert {(content[0], content[1] & 0x7F, len(content)) for content in told} == {(5, 10, 4)}
    ends = [content[1] >> 7 for content in told]
    durations = [int.from_bytes(content[2:], "big") for content in told]
    # RFC 4733 2.5.1.4: the last packet is sent three times, and its duration stays.
    assert ends == [0] * 17 + [1] * 3
    assert durations == [story.TICKS * n for n in (*range(1, 18), 18, 18, 18)]


def test_look_alikes_are_sound_packets_of_their_own_kinds(early):
    """By dpkt: names are asked for, clocks are set; no two questions have one number."""
    asked, clocks, _, chance = (
        [content for _, content in early[flow.source, flow.destination]]
        for flow in story.flows(7)
        if flow.payload_type < 0
    )
    questions = [dpkt.dns.DNS(content) for content in asked]
    assert {question.qd[0].name for question in questions} == {"depot.example"}
    assert len({question.id for question in questions}) > len(questions) / 2
    assert {(dpkt.ntp.NTP(content).v, len(content)) for content in clocks} == {(3, 48)}
    assert {content[0] for content in (*asked, *clocks, *chance)} == {0x80, 0x81, 0x9B}
    assert len({content[1] for content in chance}) > 100


def test_the_calls_that_are_up_are_those_of_the_story(whole):
    """At every second well inside and outside calls, the count is the table's."""
    told = story.calls(seed=7)
    compared = 0
    for snapshot in whole.snapshots:
        now = (snapshot.time - START_NS) / SECOND_NS
        if any(-0.5 < now - edge < 3.5 for call in told for edge in (call.start_s, call.end_s)):
            continue  # a call is found after a few packets, and ends after a silence
        up = [call for call in told if call.start_s < now < call.end_s]
        assert snapshot.calls_up == sum(call.crosses for call in up), now
        assert snapshot.elsewhere_up == sum(call.within for call in up), now
        compared += 1
    assert compared > 60


def test_look_alikes_make_no_calls(whole):
    """Names, clocks, a game and what only begins as RTP does are not taken for calls."""
    assert len(whole.calls) == len(story.calls(seed=7))
    noisy = {"{}:{}".format(*flow.source) for flow in story.flows(7) if flow.payload_type < 0}
    assert len(noisy) == 4
    ends = {stream.source for call in whole.calls for stream in call.streams}
    assert not ends & noisy


def test_packets_are_lost_towards_the_site_in_the_bad_stretch_alone(whole):
    """Every stream has the packets of its row; some percent are lost where the line is bad."""
    told = {flow.ssrc: flow for flow in story.flows(7) if flow.payload_type >= 0}
    streams = [stream for call in whole.calls for stream in call.streams]
    assert {stream.ssrc for stream in streams} == set(told)
    bad_s, bad = range(story.LOSS_FROM_S, story.LOSS_TO_S), 0
    for stream in streams:
        flow = told[stream.ssrc]
        length_s = flow.end_s - flow.start_s
        assert stream.expected == ceil(round(length_s * 1000 / story.PACKET_MS, 6))
        outwards = flow.source[0].startswith(("10.20.", "2001:db8:20:"))
        meets = max(0, min(flow.end_s, bad_s.stop) - max(flow.start_s, bad_s.start))
        if outwards or not meets:
            assert stream.lost == 0
        else:
            bad += 1
            met = meets * 1000 / story.PACKET_MS
            assert stream.lost < 3 * story.LOSS_SHARE * met + 5
            assert meets < 5 or stream.lost > story.LOSS_SHARE * met / 3
    assert bad >= 5
    assert sum(stream.reordered for stream in streams) > 0
    assert sum(stream.duplicates for stream in streams) > 0


def test_the_codec_nobody_planned_is_found(whole):
    """PCMA is told as what it is, and not as planned."""
    call = found(whole, UNPLANNED)
    assert (call.codec, call.packet_ms, call.as_planned) == ("PCMA", 20, False)


def test_the_phone_that_does_not_mark_is_found(whole):
    """Its call has the marking 0, and that is told as wrong."""
    call = found(whole, UNMARKED)
    assert (call.dscp, call.marking_right) == (0, False)
    assert found(whole, story.TOLD[-1]).marking_right


def test_the_call_without_an_answer_is_one_way(whole):
    """Audio that goes out and never comes back is one stream."""
    call = found(whole, ONE_WAY)
    assert not call.both_ways
    assert found(whole, story.TOLD[0]).both_ways


def test_the_call_from_desk_to_desk_crosses_no_link(whole):
    """A call inside the site is shown and counts for no link."""
    assert found(whole, DESK_TO_DESK).crosses == ()
    assert found(whole, story.TOLD[0]).crosses == ("wan",)


def test_digits_do_not_make_a_call_of_their_own_or_change_its_codec(whole):
    """Telephone events within a call leave it one call of its codec."""
    call = found(whole, story.TOLD[0])
    assert (call.codec, call.as_planned, len(call.streams)) == ("G729", True, 2)


def test_the_call_over_ipv6_is_found_like_any_other(whole):
    """IPv6 makes no difference to what is told of a call."""
    (told,) = (call for call in story.TOLD if call.ipv6)
    call = found(whole, told)
    assert (call.both_ways, call.crosses, call.codec) == (True, ("wan",), "G729")


def test_the_faults_of_the_story_are_raised_and_at_the_end_all_is_calm(whole):
    """Each kind of trouble that the story holds raises its alarm, and every alarm clears."""
    assert {str(alarm.kind) for alarm in whole.alarms} >= {
        "unplanned-codec",
        "wrong-marking",
        "one-way",
        "poor-quality",
        "over-calls",
        "over-budget",
        "link-full",
    }
    assert whole.snapshots[-1].alarms == ()


def test_alarms_come_at_the_seconds_of_the_story(whole):
    """Alarms of a call are raised while it is up, and not before its fault begins."""
    for kind, call in (
        ("unplanned-codec", UNPLANNED),
        ("wrong-marking", UNMARKED),
        ("one-way", ONE_WAY),
    ):
        (raised,) = ((a.raised - START_NS) / SECOND_NS for a in whole.alarms if a.kind == kind)
        assert call.start_s < raised < call.end_s


def test_counters_grow_and_hold_at_least_the_frames(whole):
    """The port's counters never fall, and count no less than was delivered."""
    for before, after in pairwise(whole.counters):
        assert after.time > before.time
        assert after.received >= before.received
        assert after.sent >= before.sent
    last = whole.counters[-1]
    assert last.up
    assert last.received + last.sent >= whole.statistics.octets - 1
    assert whole.statistics.frames == whole.snapshots[-1].tap.packets


def test_closing_ends_the_scene():
    """A scene that is closed ends at its next batch."""
    scene = Scene()
    batches = scene.batches()
    next(batches)
    scene.close()
    scene.close()
    assert list(batches) == []
