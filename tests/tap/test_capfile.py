"""Capture files, written by others and read by us."""

import gzip
import os
import struct
import threading
import warnings
from contextlib import closing
from itertools import pairwise
from pathlib import Path

import dpkt
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from wirebuild import START_NS, ethernet, ip_udp, rtp, speech

from linkwatch.errors import CaptureError
from linkwatch.frames import LinkType
from linkwatch.tap.capfile import CaptureFile

FRAMES = [(START_NS + i * 20_000_000 + i, octets) for i, (_, octets) in enumerate(speech(9))]
FRAMES[4] = (FRAMES[4][0], ethernet(ip_udp(rtp(payload=3))))


def read(path):
    """Returns [(time, octets, original, link type)] of a capture, and the remarks on it."""
    got = []
    with closing(CaptureFile(Path(path))) as tap:
        for batch in tap.batches():
            for i in range(len(batch)):
                at = int(batch.offsets[i])
                octets = bytes(batch.octets[at : at + int(batch.captured[i])])
                got.append((int(batch.times[i]), octets, int(batch.original[i]), batch.link_type))
    assert tap.statistics().frames == len(got)
    return got, tap.statistics().remarks


def pcap(frames, order="<", nano=True, link_type=1, snaplen=65535):
    """Returns a pcap file's octets, by the layout of the IETF's draft."""
    magic, unit = (0xA1B23C4D, 1) if nano else (0xA1B2C3D4, 1000)
    file = struct.pack(order + "IHHiIII", magic, 2, 4, 0, 0, snaplen, link_type)
    for time, octets in frames:
        seconds, rest = divmod(time, 10**9)
        kept = octets[:snaplen]
        file += struct.pack(order + "IIII", seconds, rest // unit, len(kept), len(octets)) + kept
    return file


def block(order, kind, body):
    body += bytes(-len(body) % 4)
    length = struct.pack(order + "I", 12 + len(body))
    return struct.pack(order + "I", kind) + length + body + length


def pcapng(frames, order="<", resolution=None, link_type=1, simple=False, offset=None):
    """Returns a pcapng file's octets with one interface, by the layout of the IETF's draft."""
    file = block(order, 0x0A0D0D0A, struct.pack(order + "IHHq", 0x1A2B3C4D, 1, 0, -1))
    options = b""
    if resolution is not None:
        options += struct.pack(order + "HHB3x", 9, 1, resolution)
    if offset is not None:
        options += struct.pack(order + "HHq", 14, 8, offset)
    options += bytes(4) if options else b""
    file += block(order, 1, struct.pack(order + "HHI", link_type, 0, 0) + options)
    file += block(order, 4, b"names of hosts that nobody needs here")
    for time, octets in frames:
        ticks = time // 1000 if resolution is None else time * 10**resolution // 10**9
        if resolution is not None and resolution & 0x80:
            ticks = time * 2 ** (resolution & 0x7F) // 10**9
        if offset is not None:
            ticks -= offset * 10 ** (resolution or 6)
        head = struct.pack(
            order + "IIIII", 0, ticks >> 32, ticks & 0xFFFFFFFF, len(octets), len(octets)
        )
        if simple:
            file += block(order, 3, struct.pack(order + "I", len(octets)) + octets)
        else:
            file += block(order, 6, head + octets)
    return file


def packet(order, interface, ticks, octets):
    """Returns an enhanced packet block's body."""
    lengths = (len(octets), len(octets))
    return struct.pack(order + "IIIII", interface, ticks >> 32, ticks % 2**32, *lengths) + octets


NANO = {order: struct.pack(order + "HHB3xI", 9, 1, 9, 0) for order in "<>"}


@pytest.mark.parametrize("order", ["<", ">"])
@pytest.mark.parametrize("nano", [True, False])
def test_pcap_is_read_in_both_orders_and_units(tmp_path, order, nano):
    """Octets, lengths and times come out as they were written, to the unit of the file."""
    (tmp_path / "a.pcap").write_bytes(pcap(FRAMES, order, nano))
    got, remarks = read(tmp_path / "a.pcap")
    unit = 1 if nano else 1000
    assert [(t, o) for t, o, _, _ in got] == [(t // unit * unit, o) for t, o in FRAMES]
    assert remarks == ()


@pytest.mark.parametrize("order", ["<", ">"])
@pytest.mark.parametrize(
    ("resolution", "exact_to"), [(None, 1000), (3, 10**6), (9, 1), (0x80 | 20, 1000)]
)
def test_pcapng_is_read_in_both_orders_and_any_unit(tmp_path, order, resolution, exact_to):
    """Enhanced packets have their times in the units of their interface."""
    (tmp_path / "a.pcapng").write_bytes(pcapng(FRAMES, order, resolution))
    got, _ = read(tmp_path / "a.pcapng")
    assert [o for _, o, _, _ in got] == [o for _, o in FRAMES]
    assert all(abs(t - u) < exact_to for (t, *_), (u, _) in zip(got, FRAMES, strict=True))


def test_an_interface_may_shift_its_times(tmp_path):
    """The offset of an interface is added to its times."""
    (tmp_path / "a.pcapng").write_bytes(pcapng(FRAMES, resolution=9, offset=1_000_000))
    got, _ = read(tmp_path / "a.pcapng")
    assert [t for t, *_ in got] == [t for t, _ in FRAMES]


def test_simple_packets_are_read(tmp_path):
    """Blocks that tell no time are frames all the same."""
    (tmp_path / "a.pcapng").write_bytes(pcapng(FRAMES, simple=True))
    got, _ = read(tmp_path / "a.pcapng")
    assert [o for _, o, _, _ in got] == [o for _, o in FRAMES]


def test_two_sections_of_both_orders_and_link_types(tmp_path):
    """Each section has its own byte order and interfaces; each batch has one link type."""
    raw = [(t, o[14:]) for t, o in FRAMES]
    file = pcapng(FRAMES, "<") + pcapng(raw, ">", link_type=101)
    (tmp_path / "a.pcapng").write_bytes(file)
    got, _ = read(tmp_path / "a.pcapng")
    assert [(o, k) for _, o, _, k in got] == [
        *((o, LinkType.ETHERNET) for _, o in FRAMES),
        *((o, LinkType.RAW) for _, o in raw),
    ]


def test_frames_of_an_unknown_link_type_are_left_out_and_it_is_said(tmp_path):
    """In a file of several interfaces, what cannot be read is counted."""
    file = pcapng(FRAMES[:2], link_type=147) + pcapng(FRAMES)
    (tmp_path / "a.pcapng").write_bytes(file)
    got, remarks = read(tmp_path / "a.pcapng")
    assert len(got) == len(FRAMES)
    assert remarks == ("2 frames of link type 147 cannot be read and are left out",)


def test_a_capture_of_unknown_link_types_alone_names_them(tmp_path):
    """Where no frame can be read, the error names the number, as for pcap."""
    (tmp_path / "a.pcapng").write_bytes(pcapng(FRAMES, link_type=147))
    with pytest.raises(CaptureError, match="link type 147"):
        read(tmp_path / "a.pcapng")


@pytest.mark.parametrize("order", ["<", ">"])
def test_interfaces_of_several_link_types_take_turns(tmp_path, order):
    """Each frame has the link type and the unit of its interface, and none is too late."""
    file = pcapng([], order) + block(order, 1, struct.pack(order + "HHI", 101, 0, 0) + NANO[order])
    wanted = []
    for i, (time, octets) in enumerate(FRAMES):
        raw = i % 2
        kept = octets[14:] if raw else octets
        file += block(order, 6, packet(order, raw, time if raw else time // 1000, kept))
        wanted.append((time if raw else time // 1000 * 1000, kept, len(kept), 101 if raw else 1))
    (tmp_path / "a.pcapng").write_bytes(file)
    got, remarks = read(tmp_path / "a.pcapng")
    assert sorted(got) == wanted
    assert remarks == ()
    with closing(CaptureFile(tmp_path / "a.pcapng")) as tap:
        batches = [(batch.times.min(), batch.until) for batch in tap.batches()]
    assert len(batches) < len(FRAMES)
    assert all(until <= first for (_, until), (first, _) in pairwise(batches))
    assert batches[-1][1] == wanted[-1][0] + 1


@pytest.mark.parametrize("order", ["<", ">"])
def test_the_older_packet_blocks_are_read(tmp_path, order):
    """They have 16 bits of interface and 16 of drops, which are no part of its number."""
    file = pcapng([], order)
    for time, octets in FRAMES:
        head = struct.pack(order + "HH", 0, 5) + packet(order, 0, time // 1000, octets)[4:]
        file += block(order, 2, head)
    (tmp_path / "a.pcapng").write_bytes(file)
    got, _ = read(tmp_path / "a.pcapng")
    assert [o for _, o, _, _ in got] == [o for _, o in FRAMES]


def test_a_packet_that_tells_no_time_has_that_of_the_one_before(tmp_path):
    """Simple packets among others never let time go back."""
    simple = block("<", 3, struct.pack("<I", 5) + b"abcde")
    file = pcapng([]) + block("<", 6, packet("<", 0, FRAMES[0][0] // 1000, b"x" * 60)) + simple * 2
    (tmp_path / "a.pcapng").write_bytes(file)
    got, _ = read(tmp_path / "a.pcapng")
    assert [o[:5] for _, o, _, _ in got] == [b"x" * 5, b"abcde", b"abcde"]
    assert len({t for t, *_ in got}) == 1


def test_packets_that_contradict_themselves_are_left_out_and_counted(tmp_path):
    """A length beyond its block, and an interface that is described later, cannot be."""
    time, octets = FRAMES[0]
    early = block("<", 6, packet("<", 1, time // 1000, octets))
    too_long = block("<", 6, struct.pack("<IIIII", 0, 0, 0, len(octets) + 99, 0) + octets)
    late = block("<", 1, struct.pack("<HHI", 1, 0, 0))
    (tmp_path / "a.pcapng").write_bytes(pcapng(FRAMES) + early + too_long + late)
    got, remarks = read(tmp_path / "a.pcapng")
    assert len(got) == len(FRAMES)
    assert remarks == ("2 damaged frames are left out",)


@pytest.mark.parametrize("make", [pcap, pcapng])
def test_garbage_in_the_middle_costs_no_frame_before_it(tmp_path, make):
    """What stands before is delivered, and a remark says where reading ended."""
    whole = make(FRAMES)
    (tmp_path / "a").write_bytes(whole + b"\xff" * 500 + whole[24:])
    got, remarks = read(tmp_path / "a")
    assert [o for _, o, _, _ in got] == [o for _, o in FRAMES]
    assert f"damaged at octet {len(whole)}" in remarks[0]


def test_a_file_that_shrinks_while_it_is_read_is_cut_off(tmp_path):
    """What was there is delivered, and the rest is told as missing."""
    path = tmp_path / "a"
    path.write_bytes(pcap(FRAMES) + pcap(FRAMES)[24:] * 2999)
    with closing(CaptureFile(path)) as tap:
        batches = tap.batches()
        frames = len(next(batches))
        os.truncate(path, 100)
        frames += sum(len(batch) for batch in batches)
        assert 0 < frames < 3000 * len(FRAMES)
        assert "cut off" in tap.statistics().remarks[0]


def test_progress_runs_from_nothing_to_all(tmp_path):
    """How much is read rises to 1, in a packed file as well, and is known to the end."""
    long = pcap(FRAMES) + pcap(FRAMES)[24:] * 2999
    (tmp_path / "a").write_bytes(long)
    (tmp_path / "a.gz").write_bytes(gzip.compress(long, 1))
    for name in ("a", "a.gz"):
        tap = CaptureFile(tmp_path / name)
        seen = [tap.progress, *(tap.progress for _ in tap.batches())]
        tap.close()
        assert seen == sorted(seen)
        assert seen[0] < tap.progress == 1.0


def test_what_dpkt_writes_is_read(tmp_path):
    """dpkt's writer is an oracle: times and octets are the same."""
    with (tmp_path / "a.pcap").open("wb") as file:
        writer = dpkt.pcap.Writer(file, nano=True)
        for time, octets in FRAMES:
            writer.writepkt_time(octets, time / 1e9)
    got, _ = read(tmp_path / "a.pcap")
    assert [o for _, o, _, _ in got] == [o for _, o in FRAMES]
    assert all(abs(t - u) < 1000 for (t, *_), (u, _) in zip(got, FRAMES, strict=True))


def test_what_scapy_writes_is_read(tmp_path):
    """scapy's writers are oracles, for both formats."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        from scapy.layers.l2 import Ether
        from scapy.utils import PcapNgWriter, wrpcap
    packets = [Ether(octets) for _, octets in FRAMES]
    for packet, (time, _) in zip(packets, FRAMES, strict=True):
        packet.time = time / 1e9
    wrpcap(str(tmp_path / "a.pcap"), packets)
    writer = PcapNgWriter(str(tmp_path / "a.pcapng"))
    writer.write(packets)
    writer.close()
    for name in ("a.pcap", "a.pcapng"):
        got, _ = read(tmp_path / name)
        assert [o for _, o, _, _ in got] == [o for _, o in FRAMES]
        assert all(abs(t - u) < 2000 for (t, *_), (u, _) in zip(got, FRAMES, strict=True))


@pytest.mark.parametrize("make", [pcap, pcapng])
def test_gzipped_and_piped_captures_are_the_same(tmp_path, make):
    """A packed file and a pipe hold what the plain file holds."""
    (tmp_path / "a").write_bytes(make(FRAMES))
    (tmp_path / "a.gz").write_bytes(gzip.compress(make(FRAMES)))
    os.mkfifo(tmp_path / "pipe")
    feeder = threading.Thread(target=lambda: (tmp_path / "pipe").write_bytes(make(FRAMES)))
    feeder.start()
    piped, _ = read(tmp_path / "pipe")
    feeder.join()
    plain, _ = read(tmp_path / "a")
    packed, _ = read(tmp_path / "a.gz")
    assert plain == packed == piped


def test_frames_cut_by_the_snaplen_keep_their_true_length(tmp_path):
    """The length on the wire is not the length captured."""
    (tmp_path / "a.pcap").write_bytes(pcap(FRAMES, snaplen=64))
    got, _ = read(tmp_path / "a.pcap")
    assert [n for _, _, n, _ in got] == [len(o) for _, o in FRAMES]
    assert max(len(o) for _, o, _, _ in got) == 64


@pytest.mark.parametrize("make", [pcap, pcapng])
def test_a_file_cut_anywhere_loses_no_earlier_frame(tmp_path, make):
    """Whatever octet a file ends at, all frames before are read; a head cut short is told."""
    whole = make(FRAMES)
    path = tmp_path / "a"
    for end in range(len(whole)):
        path.write_bytes(whole[:end])
        try:
            got, remarks = read(path)
        except CaptureError:
            assert end < 200
            continue
        complete = sum(octets in whole[:end] for _, octets in FRAMES)
        assert len(got) in (complete, complete - 1)  # the last may lack its trailing length
        assert len(remarks) <= 1


@pytest.mark.parametrize("make", [pcap, pcapng])
@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=200)
@given(data=st.data())
def test_damaged_files_are_read_as_far_as_they_go(tmp_path, make, data):
    """Any damage gives frames, a remark or one clear error; never anything else."""
    octets = bytearray(make(FRAMES))
    for _ in range(data.draw(st.integers(1, 4))):
        octets[data.draw(st.integers(0, len(octets) - 1))] = data.draw(st.integers(0, 255))
    path = tmp_path / "a"
    path.write_bytes(octets)
    try:
        read(path)
    except CaptureError as error:
        assert "\n" not in str(error)


@pytest.mark.parametrize(
    ("content", "says"),
    [
        (b"", "0 octets"),
        (b"PK\x03\x04" + bytes(60), "50 4b 03 04"),
        (b"\x1f\x8b" + bytes(60), "0 octets"),
        (pcap([], link_type=195), "link type 195"),
    ],
)
def test_what_is_no_capture_is_told_in_one_line(tmp_path, content, says):
    """The error names the file and what was found there."""
    (tmp_path / "a.pcap").write_bytes(content)
    with pytest.raises(CaptureError) as told:
        read(tmp_path / "a.pcap")
    assert "a.pcap" in str(told.value)
    assert says in str(told.value)


def test_files_that_are_not_there_and_directories_are_told(tmp_path):
    """No file, and a directory, are errors that name themselves."""
    for path in (tmp_path, tmp_path / "none", Path("a\0b")):
        with pytest.raises(CaptureError):
            CaptureFile(path)


def test_a_capture_longer_than_a_piece_is_whole(tmp_path, monkeypatch):
    """Where pieces of the file end makes no difference."""
    (tmp_path / "a").write_bytes(pcapng(FRAMES * 20))
    whole, _ = read(tmp_path / "a")
    for piece in (24, 100, 1001):
        monkeypatch.setattr("linkwatch.tap.capfile.PIECE", piece)
        assert read(tmp_path / "a")[0] == whole


def test_closing_ends_the_batches(tmp_path):
    """A tap that is closed from elsewhere ends quietly."""
    (tmp_path / "a").write_bytes(pcap(FRAMES))
    tap = CaptureFile(tmp_path / "a")
    tap.close()
    tap.close()
    assert list(tap.batches()) == []
