"""The live ring and its gate, on real frames through a real pair of ports."""

import fcntl
import json
import os
import socket
import struct
import subprocess
import sys
from contextlib import closing
from pathlib import Path

import numpy as np
import pytest
from wirebuild import ethernet, ip_udp, rtp

from linkwatch.errors import TapError
from linkwatch.frames import LinkType
from linkwatch.tap import ring
from linkwatch.tap.gate import headers_only
from linkwatch.tap.ring import PacketRing

pytestmark = pytest.mark.lab
SPEECH = b"\xa7speech\x5a"
SET_TUNNEL, BARE_TUNNEL = 0x400454CA, 0x1001  # linux/if_tun.h: TUNSETIFF, IFF_TUN | IFF_NO_PI


def ip(*words):
    subprocess.run(["ip", *words], check=True, capture_output=True)


@pytest.fixture
def pair(lab_ports):
    """A ring on one end of a wire, and a socket that sends frames into the other end."""
    here, there = lab_ports
    with closing(PacketRing(here)) as tap, sending_into(there) as out:
        yield tap, out


def sending_into(port):
    out = socket.socket(socket.AF_PACKET, socket.SOCK_RAW, 0)
    out.bind((port, 0))
    return out


def heard(tap, at_least=0):
    """Returns (octets handed over, length on the wire) of the frames that are heard soon."""
    got, quiet = [], 0
    for batch in tap.batches():
        for i in range(len(batch)):
            at = int(batch.offsets[i])
            octets = bytes(batch.octets[at : at + int(batch.captured[i])])
            got.append((octets, int(batch.original[i])))
        quiet = 0 if len(batch) else quiet + 1
        if quiet >= 3 and (len(got) >= at_least or quiet > 20):
            return got
    return got


def speech_frame(**of):
    packet = rtp(**of)[: -of.get("payload", 160) or None] + SPEECH * 20
    return ethernet(ip_udp(packet))


def test_every_frame_is_heard_once_and_counted(pair):
    """A thousand frames in, a thousand out, none dropped, their lengths those of the wire."""
    tap, out = pair
    frames = [ethernet(ip_udp(rtp(i, i * 160, payload=20 + i % 200))) for i in range(1000)]
    for frame in frames:
        out.send(frame)
    got = heard(tap, 1000)
    assert [length for _, length in got] == [len(frame) for frame in frames]
    assert (tap.statistics().frames, tap.statistics().dropped) == (1000, 0)


def test_rtp_is_handed_over_as_far_as_its_header(pair):
    """Fixed header, CSRC list, and an extension's own header: not an octet of speech."""
    tap, out = pair
    plain = speech_frame()
    with_csrcs = ethernet(ip_udp(rtp(csrcs=3, payload=0) + SPEECH * 20))
    extended = ethernet(ip_udp(rtp(extension=1, payload=0) + SPEECH * 20))
    six = ethernet(ip_udp(rtp(payload=0) + SPEECH * 20, "2001:db8::7", "2001:db8::9"))
    tagged = ethernet(ip_udp(rtp(payload=0) + SPEECH * 20), tags=[20, 30])
    for frame in (plain, with_csrcs, extended, six, tagged):
        out.send(frame)
    got = [octets for octets, _ in heard(tap, 5)]
    base = 14 + 20 + 8 + 12
    # The kernel may take the outer tag off; then it is counted in the length, not handed over.
    assert [len(octets) for octets in got][:4] == [base, base + 12, base + 4, base + 20]
    assert len(got[4]) in (base + 8, base + 4)
    assert not any(SPEECH[:4] in octets for octets in got)


def test_no_octet_of_speech_is_in_the_ring(pair):
    """The memory that the kernel fills holds no speech, wherever one looks in it."""
    tap, out = pair
    for i in range(300):
        out.send(speech_frame(sequence=i))
    assert len(heard(tap, 300)) == 300
    assert SPEECH not in tap._memory.tobytes()


def test_fragments_are_handed_over_as_far_as_their_headers(pair):
    """The first fragment tells the RTP header; later ones, of either family, no payload at all."""
    tap, out = pair
    four = bytearray(ethernet(ip_udp(rtp(payload=0) + SPEECH * 20)))
    struct.pack_into("!H", four, 14 + 6, 0x2000 | 5)  # more to come, 40 octets on (RFC 791 3.1)
    six = ethernet(ip_udp(rtp(payload=0) + SPEECH * 20, "2001:db8::7", "2001:db8::9"))
    head, rest = bytearray(six[: 14 + 40]), six[14 + 40 :]
    head[14 + 6] = 44  # a fragment header follows (RFC 8200 4.5)
    first = bytes(head) + struct.pack("!BBHI", 17, 0, 1, 9) + rest
    later = bytes(head) + struct.pack("!BBHI", 17, 0, 40 << 3 | 1, 9) + SPEECH * 20
    for frame in (bytes(four), first, later):
        out.send(frame)
    got = [octets for octets, _ in heard(tap, 3)]
    assert [len(octets) for octets in got] == [14 + 20, 14 + 40 + 8 + 8 + 12, 14 + 40 + 8]
    assert not any(SPEECH[:4] in octets for octets in got)


def test_other_udp_shows_its_header_alone_and_the_rest_nothing(pair):
    """A name query is a UDP header; TCP and ARP are not heard at all."""
    tap, out = pair
    query = ethernet(ip_udp(b"\x12\x34" + SPEECH * 9))
    tcp = bytearray(query)
    tcp[14 + 9] = 6
    arp = query[:12] + struct.pack("!H", 0x0806) + bytes(46)
    for frame in (query, bytes(tcp), arp):
        out.send(frame)
    assert [len(octets) for octets, _ in heard(tap, 1)] == [14 + 20 + 8]


def test_tags_that_the_kernel_takes_off_count(pair):
    """A tagged frame is as long as it was on the wire."""
    tap, out = pair
    frame = ethernet(ip_udp(rtp()), tags=[20])
    out.send(frame)
    ((octets, length),) = heard(tap, 1)
    assert length == len(frame)
    assert len(octets) <= len(frame) - 160


def test_frames_above_the_mtu_are_told(pair):
    """Merged packets falsify octets per packet: the remark says so and names the remedy."""
    tap, _ = pair
    tap._note(np.array([200, 9000]))
    statistics = tap.statistics()
    assert statistics.oversize == 1
    assert "offload" in statistics.remarks[0]


def test_frames_that_the_kernel_drops_are_counted(lab_ports, monkeypatch):
    """A ring that nobody empties drops, and how many is known."""
    monkeypatch.setattr(ring, "BLOCKS", 2)
    monkeypatch.setattr(ring, "BLOCK_OCTETS", 1 << 14)
    here, there = lab_ports
    with closing(PacketRing(here)) as tap, sending_into(there) as out:
        for _ in range(2000):
            out.send(ethernet(ip_udp(rtp())))
        kept = len(heard(tap, 1))
        assert kept + tap.statistics().dropped == 2000
        assert tap.statistics().dropped > 0


def test_the_loopback_shows_each_frame_once(lab_ports):
    """There every frame passes twice, going and coming; one of each is read."""
    with (
        closing(PacketRing("lo")) as tap,
        socket.socket(socket.AF_INET, socket.SOCK_DGRAM) as out,
    ):
        for i in range(50):
            out.sendto(rtp(i), ("127.0.0.1", 40_002))
        assert len(heard(tap, 50)) == 50


def test_a_port_that_goes_down_is_survived(pair, lab_ports):
    """Time goes on, a remark says what happened, and nothing fails."""
    tap, _ = pair
    for state in ("down", "up"):
        subprocess.run(["ip", "link", "set", lab_ports[0], state], check=True)
        heard(tap)
    assert any("went down" in remark for remark in tap.statistics().remarks)
    assert tap.counters().up


def test_a_port_that_vanishes_is_survived_and_heard_again_when_it_is_back(lab_ports):
    """A pulled adapter leaves a silent tap; plugged in again it is heard, as it was at first."""
    here, there = lab_ports
    with closing(PacketRing(here)) as tap:
        ip("link", "del", here)
        assert heard(tap) == []
        assert not tap.counters().up
        ip("link", "add", here, "type", "veth", "peer", "name", there)
        for port in (here, there):
            ip("link", "set", port, "up")
        heard(tap)
        with sending_into(there) as out:
            out.send(speech_frame())
            ((octets, length),) = [frame for frame in heard(tap, 1) if b"\x45\xb8" in frame[0]]
        assert (len(octets), length) == (14 + 20 + 8 + 12, len(speech_frame()))
        assert any("came back" in remark for remark in tap.statistics().remarks)


def heard_from_the_ip_packet_on(tap, frame):
    """Asserts that one frame is heard, its length and its octets counted from its IP packet."""
    (batch,) = [batch for batch, _ in zip(tap.batches(), range(4), strict=False) if len(batch)]
    assert batch.link_type is LinkType.RAW
    assert batch.captured.tolist() == [20 + 8 + 12]
    assert batch.original.tolist() == [len(frame) - 14]
    at = int(batch.offsets[0])
    assert bytes(batch.octets[at : at + 40]) == frame[14:54]


def test_a_tunnel_of_bare_ip_packets_is_heard(lab):
    """Where frames have no link header at all, they begin with the IP packet."""
    name = f"lw{os.getpid() % 100_000}t"
    maker = Path("/dev/net/tun")
    if not maker.exists():
        pytest.skip("this kernel makes no tunnels")
    with maker.open("r+b", buffering=0) as tunnel:
        fcntl.ioctl(tunnel, SET_TUNNEL, struct.pack("16sH22x", name.encode(), BARE_TUNNEL))
        ip("link", "set", name, "up")
        with closing(PacketRing(name)) as tap:
            tunnel.write(speech_frame()[14:])
            heard_from_the_ip_packet_on(tap, speech_frame())


def test_a_port_whose_header_varies_is_heard_from_the_ip_packet_on(lab_ports, monkeypatch):
    """The kernel takes the link header off; tried on Ethernet, since it has a known one."""
    monkeypatch.setattr(ring, "ETHERNETS", ())
    monkeypatch.setattr(ring, "TUNNELS", (1,))
    here, there = lab_ports
    with closing(PacketRing(here)) as tap, sending_into(there) as out:
        out.send(speech_frame())
        heard_from_the_ip_packet_on(tap, speech_frame())


def test_a_port_of_another_kind_is_refused_by_its_number(lab_ports, monkeypatch):
    """The error says what kind of hardware it is, and which kinds can be read."""
    monkeypatch.setattr(ring, "ETHERNETS", ())
    with pytest.raises(TapError, match="hardware type 1; wanted Ethernet"):
        PacketRing(lab_ports[0])


@pytest.mark.parametrize("ethernet_header", [True, False])
def test_the_gate_is_a_program_that_the_kernel_takes(ethernet_header):
    """The filter has at most the kernel's 4096 instructions, each of eight octets."""
    program = headers_only(ethernet=ethernet_header)
    assert len(program) % 8 == 0
    assert len(program) // 8 < 4096


def test_voice_in_tunnels_of_labels_and_sessions_passes_the_gate(pair):
    """MPLS labels and PPPoE sessions in front of the IP packet are stepped over."""
    tap, out = pair
    packet = ip_udp(rtp(payload=0) + SPEECH * 20)
    head = ethernet(packet)[:12]
    labels = struct.pack("!HII", 0x8847, 16 << 12 | 64, 17 << 12 | 1 << 8 | 64)
    session = struct.pack("!HBBHHH", 0x8864, 0x11, 0, 7, len(packet) + 2, 0x0021)
    for between in (labels, session):
        out.send(head + between + packet)
    got = [octets for octets, _ in heard(tap, 2)]
    assert [len(octets) for octets in got] == [12 + 10 + 40, 12 + 10 + 40]
    assert not any(SPEECH[:4] in octets for octets in got)


def test_log_tells_of_a_port_as_json(lab_ports):
    """The command itself, on a live port, answers by the published keys."""
    asked = [sys.executable, "-m", "linkwatch", "log", "--tap", lab_ports[0], "--for", "1.5"]
    told = subprocess.run([*asked, "--json"], capture_output=True, check=True, text=True)
    for line in told.stdout.splitlines():
        snapshot = json.loads(line)
        assert snapshot["tap"]["name"] == lab_ports[0]
        assert set(snapshot) >= {"time", "tap", "links", "calls_up", "alarms"}
