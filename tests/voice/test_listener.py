"""From frames to streams and calls: the voice floor by its one door."""

import itertools

import numpy as np
import pytest
import rfc3550
from hypothesis import given, settings
from hypothesis import strategies as st
from wirebuild import GATEWAY, MS, PHONE, START_NS, batch, both_ways, ethernet, ip_udp, rtp, speech

from linkwatch.frames import LinkType
from linkwatch.plan.framing import make_framing
from linkwatch.voice import streams
from linkwatch.voice.listener import Listener

ETHERNET = make_framing(["ethernet"])


def heard(frames, *, payload_types=None, cuts=(), conclude_s=0.0, snaplen=65535):
    """Returns a listener that has heard these frames, in batches that end before the cuts."""
    listener = Listener(payload_types or {}, [ETHERNET])
    edges = [0, *sorted(cuts), len(frames)]
    for start, stop in itertools.pairwise(edges):
        if stop > start:
            listener.hear(batch(frames[start:stop], LinkType.ETHERNET, snaplen))
    listener.conclude(frames[-1][0] + round(conclude_s * 1e9))
    return listener


def only_stream(listener):
    (stream,) = listener.streams.values()
    return stream


def test_a_steady_stream_is_told_to_the_octet():
    """Codec, packetisation, octets and rate of a plain stream are exact."""
    stream = only_stream(heard(speech(packets=250)))
    assert (stream.source, stream.destination) == ("10.20.1.7:16384", "10.9.0.3:20000")
    assert (stream.codec, stream.codec_evidence, stream.media) == ("PCMU", "static", "audio")
    assert (stream.packet_ms, stream.packets, stream.lost) == (20, 250, 0)
    assert (stream.ip_octets, stream.link_octets) == (250 * 200, 250 * 218)
    # Common practice, no source: G.711 at 20 ms over Ethernet is 87.2 kbit/s.
    assert stream.link_kbps == pytest.approx(87.2)
    assert (stream.jitter_ms, stream.jitter_max_ms) == (0, 0)
    assert (stream.dscp, stream.dscp_steady) == (46, True)


# RFC 3551 6, table 4; payload sizes 4.5.
@pytest.mark.parametrize(
    ("pt", "payload", "packet_ms", "codec"),
    [
        (0, 160, 20, "PCMU"),
        (8, 240, 30, "PCMA"),
        (9, 160, 20, "G722"),  # clock 8000, though it samples at 16 kHz (4.5.2)
        (18, 20, 20, "G729"),
        (3, 33, 20, "GSM"),
        (4, 24, 30, "G723-6.3"),
        (4, 20, 30, "G723-5.3"),
    ],
)
def test_static_payload_types_name_their_codecs(pt, payload, packet_ms, codec):
    """The codec is that of RFC 3551, and of two rates the one that the payload fits."""
    stream = only_stream(heard(speech(pt=pt, payload=payload, packet_ms=packet_ms)))
    assert (stream.codec, stream.packet_ms) == (codec, packet_ms)


def test_the_plan_names_dynamic_payload_types():
    """A dynamic payload type means what the plan says, and the evidence says so."""
    frames = speech(pt=97, payload=50, packet_ms=30)
    stream = only_stream(heard(frames, payload_types={97: "ILBC"}))
    assert (stream.codec, stream.codec_evidence) == ("ILBC-30", "plan")


def test_a_codec_that_nobody_named_is_heard_all_the_same():
    """Without a name the clock is found from the timestamps, so packetisation and jitter are."""
    stream = only_stream(heard(speech(pt=111, packet_ms=20, clock_hz=48000, payload=71)))
    assert (stream.codec, stream.media, stream.packet_ms) == ("unknown", "audio", 20)
    assert stream.jitter_ms == 0


def test_video_is_no_call():
    """A stream with the clock of video is shown as such and never makes a call."""
    frames = speech(pt=96, packet_ms=40, clock_hz=90000, payload=900)
    listener = heard(frames)
    assert only_stream(listener).media == "video"
    assert len(listener.calls) == 0


def test_both_directions_are_one_call():
    """Streams between the same two pairs of addresses and ports are one call, both ways."""
    (call,) = heard(both_ways()).calls
    assert call.both_ways
    assert len(call.streams) == 2


def test_one_direction_is_a_call_one_way():
    """A call of which one direction is heard is a call, and not both ways."""
    (call,) = heard(speech()).calls
    assert not call.both_ways


def test_a_changed_ssrc_stays_in_its_call():
    """A sender that begins anew with another SSRC is still in the same call."""
    frames = speech() + speech(ssrc=99, start_ns=START_NS + 1000 * MS)
    (call,) = heard(frames).calls
    assert len(call.streams) == 2
    assert not call.both_ways


def test_a_call_is_up_until_it_is_silent():
    """A call is up while a direction sends, and down a few seconds after the last packet."""
    listener = heard(both_ways(), conclude_s=2.5)
    assert [call.up for call in listener.calls] == [True]
    listener.conclude(START_NS + 5_000 * MS)
    assert [call.up for call in listener.calls] == [False]


def test_the_same_ports_later_are_another_call():
    """A stream that comes long after both directions fell silent is the next call."""
    later = both_ways(start_ns=START_NS + 20_000 * MS, ssrc=0x9999)
    assert len(heard(both_ways() + later).calls) == 2


def test_copies_of_frames_are_counted_and_change_nothing_else():
    """A mirror that shows every frame twice hides no loss and makes no jitter."""
    frames = [frame for frame in speech(packets=100, lose={40, 41}) for _ in range(2)]
    stream = only_stream(heard(frames))
    assert (stream.packets, stream.duplicates, stream.lost) == (196, 98, 2)
    assert stream.jitter_max_ms == pytest.approx(0, abs=1e-9)


def test_telephone_events_spoil_no_jitter():
    """Events repeat one timestamp (RFC 4733 2.5.1.2); they have a payload type of their own."""
    frames = speech(packets=100)
    for i in range(30, 40):
        event = rtp(100 + i, 4000 + 30 * 160, pt=101, payload=4)
        frames[i] = (frames[i][0], ethernet(ip_udp(event)))
    stream = only_stream(heard(frames, payload_types={101: "telephone-event"}))
    assert (stream.lost, stream.payload_type) == (0, 0)
    assert stream.jitter_max_ms == pytest.approx(0, abs=1e-9)


def test_markings_that_change_are_noticed():
    """The last marking counts, and that it was not the only one is said."""
    frames = speech(packets=20) + speech(
        packets=20, dscp=0, first_sequence=120, start_ns=START_NS + 400 * MS
    )
    stream = only_stream(heard(frames))
    assert (stream.dscp, stream.dscp_steady) == (0, False)


def test_headers_tell_all_where_speech_was_cut_off():
    """64 octets of each frame are enough for every figure."""
    whole, cut = heard(speech(packets=100)), heard(speech(packets=100), snaplen=64)
    assert only_stream(whole) == only_stream(cut)


def look_alikes():
    rng = np.random.default_rng(3)
    yield "the same header again and again", [rtp(7, 7000)] * 60
    yield "random after 0x80", [b"\x80" + rng.bytes(90) for _ in range(500)]
    yield "numbers that run backwards", [rtp(1000 - i, 160 * i) for i in range(60)]
    yield "timestamps that go their own way", [rtp(i, int(rng.integers(2**32))) for i in range(300)]
    yield "RTCP", [b"\x80\xc8" + rtp(i, i)[2:40] for i in range(60)]
    yield "a name query", [bytes([0x80, i]) + b"\x01\x00\x00\x01" + bytes(30) for i in range(60)]
    yield "a time query", [b"\x9b\x03\x06\xec" + bytes(44)] * 60
    yield "four packets", [rtp(i, 160 * i) for i in range(4)]
    yield "numbers without time", [rtp(i, 42) for i in range(60)]


@pytest.mark.parametrize(
    ("name", "datagrams"), list(look_alikes()), ids=[name for name, _ in look_alikes()]
)
def test_what_only_looks_like_rtp_is_not_taken_for_it(name, datagrams):
    """A stream must show numbers that advance and timestamps that go with them."""
    frames = [
        (START_NS + i * 20 * MS, ethernet(ip_udp(octets))) for i, octets in enumerate(datagrams)
    ]
    assert heard(frames).streams == {}, name


def test_a_flood_of_random_sources_leaves_the_real_call_right():
    """Memory stays bounded; the call between the flood's packets keeps its exact figures."""
    rng = np.random.default_rng(1)
    flood = [
        (START_NS + i * 20_000, ethernet(ip_udp(b"\x80\x00" + rng.bytes(26), ports=(5, 6))))
        for i in range(45_000)
    ]
    frames = sorted(flood + both_ways(packets=50), key=lambda frame: frame[0])
    listener = heard(frames, cuts=range(0, len(frames), 4000))
    (call,) = listener.calls
    assert [s.lost for s in call.streams.values()] == [0, 0]
    assert listener.statistics().left_out > 0


def test_who_speaks_in_a_crowd_keeps_his_place(monkeypatch):
    """A table that makes room never takes the row of a source whose packet it holds in hand."""
    monkeypatch.setattr(streams, "MOST_SOURCES", 16)
    slow = speech(packets=12, packet_ms=2000)  # a packet every two seconds
    frames, rng = [], np.random.default_rng(5)
    for time, octets in slow:
        frames.append((time, octets))
        frames += [
            (time, ethernet(ip_udp(b"\x80\x00" + rng.bytes(26), ports=(7, 8)))) for _ in range(40)
        ]
    listener = heard(frames, cuts=range(41, len(frames), 41))
    stream = only_stream(listener)
    assert (stream.packets, stream.lost, stream.ssrc) == (12, 0, 0x1234)


packets_of_one_source = st.lists(
    st.tuples(
        st.one_of(st.integers(1, 4), st.integers(-3, 0), st.sampled_from([3500, -200, 20_000])),
        st.integers(0, 60),  # ms since the packet before
        st.integers(-80, 80),  # timestamp off its place
        st.sampled_from([0, 0, 0, 8]),  # payload type: sometimes another codec's
    ),
    min_size=1,
    max_size=120,
)


@settings(max_examples=150)
@given(
    sources=st.lists(packets_of_one_source, min_size=1, max_size=3),
    start=st.integers(0, 65535),
    cuts=st.sets(st.integers(1, 400), max_size=6),
)
def test_any_stream_in_any_batches_has_the_counts_of_the_rfc(sources, start, cuts):
    """Random, late, copied, wrapped, lost and restarted: every figure is the reference's."""
    frames, plain = [], []
    for number, steps in enumerate(sources):
        time, sequence = START_NS + number, start
        told = []
        # A steady beginning, so that the source is accepted whatever comes after.
        for step, gap, off, pt in [(1, 20, 0, 0)] * 5 + steps:
            sequence, time = (sequence + step) % 65536, time + gap * MS
            timestamp = ((time - START_NS) // MS * 8 + off) % 2**32
            told.append((time, sequence, timestamp, pt))
            packet = rtp(sequence, timestamp, ssrc=7000 + number, pt=pt)
            frames.append((time, ethernet(ip_udp(packet, ports=(4000 + number, 5000)))))
        plain.append(told)
    frames.sort(key=lambda frame: frame[0])
    listener = heard(frames, cuts=[cut for cut in cuts if cut < len(frames)])
    streams = {stream.ssrc: stream for stream in listener.streams.values()}
    assert len(streams) == len(sources)
    for number, told in enumerate(plain):
        stream = streams[7000 + number]
        source = rfc3550.Source(told[0][1])
        jitters = {0: rfc3550.Jitter(8000), 8: rfc3550.Jitter(8000)}
        counts = {0: 0, 8: 0}
        for time, sequence, timestamp, pt in told:
            if source.update_seq(sequence):
                jitters[pt].take(time, timestamp, source.segment)
                counts[pt] += 1
        assert stream.packets == len(told)
        assert (stream.expected, stream.lost) == (source.expected, source.lost)
        assert stream.lost_a3 == source.lost_a3
        assert (stream.duplicates, stream.reordered) == (source.duplicates, source.reordered)
        main = 0 if counts[0] >= counts[8] else 8
        jitter = jitters[main]
        assert stream.payload_type == main
        if jitter.count:
            assert stream.jitter_ms == pytest.approx(jitter.now / 8, rel=1e-9, abs=1e-9)
            assert stream.jitter_max_ms == pytest.approx(jitter.highest / 8, rel=1e-9, abs=1e-9)
            mean = jitter.total / jitter.count / 8
            assert stream.jitter_mean_ms == pytest.approx(mean, rel=1e-9, abs=1e-9)


@settings(max_examples=30)
@given(cuts=st.sets(st.integers(1, 199), max_size=8))
def test_batch_boundaries_change_nothing(cuts):
    """However a capture is cut into batches, streams and calls come out the same."""
    frames = both_ways(packets=100, lose={17, 60}, pt=111, clock_hz=48000)
    whole, cut = heard(frames), heard(frames, cuts=cuts)
    assert whole.streams == cut.streams


@settings(max_examples=60)
@given(st.lists(st.binary(min_size=12, max_size=60), min_size=1, max_size=40), st.booleans())
def test_any_datagram_is_survived(datagrams, version_right):
    """Whatever a datagram holds, nothing fails."""
    frames = [
        (START_NS + i, ethernet(ip_udp((b"\x90" if version_right else b"") + octets)))
        for i, octets in enumerate(datagrams)
    ]
    heard(frames, cuts=[1])


def test_addresses_of_both_families_are_told_apart():
    """An IPv6 call beside an IPv4 call: two calls, each with its own addresses."""
    six = both_ways("2001:db8:20::7", "2001:db8:9::3", ssrc=77)
    listener = heard(sorted(both_ways() + six, key=lambda frame: frame[0]))
    sources = {stream.source for call in listener.calls for stream in call.streams.values()}
    assert len(listener.calls) == 2
    assert "[2001:db8:20::7]:16384" in sources
    assert f"{PHONE}:16384" in sources
    assert f"{GATEWAY}:20000" in sources
