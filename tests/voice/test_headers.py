"""From frames to UDP datagrams; scapy and dpkt are the oracles."""

import struct
import warnings
from ipaddress import IPv6Address

import dpkt
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from wirebuild import START_NS, batch, ethernet, ip_udp, rtp

from linkwatch.frames import LinkType
from linkwatch.voice.headers import datagrams

with warnings.catch_warnings():
    warnings.simplefilter("ignore")
    from scapy.contrib.mpls import MPLS
    from scapy.layers.inet import IP, UDP, fragment
    from scapy.layers.inet6 import IPv6, IPv6ExtHdrDestOpt, IPv6ExtHdrHopByHop
    from scapy.layers.l2 import CookedLinux, Dot1AD, Dot1Q, Ether
    from scapy.layers.ppp import PPP, PPPoE
    from scapy.packet import Raw


def found(frame, link_type=LinkType.ETHERNET):
    """Returns (source, destination, ports, dscp, ip octets, payload octets) of what is found."""
    of = datagrams(batch([(START_NS, bytes(frame))], link_type))
    return [
        (
            *(
                str(a.ipv4_mapped or a)
                for a in (
                    IPv6Address(int(of.ends[0][i]) << 64 | int(of.ends[1][i])),
                    IPv6Address(int(of.ends[2][i]) << 64 | int(of.ends[3][i])),
                )
            ),
            (int(of.ports[i]) >> 16, int(of.ports[i]) & 0xFFFF),
            int(of.dscp[i]),
            int(of.ip_octets[i]),
            int(of.payload_octets[i]),
        )
        for i in range(len(of))
    ]


SPEECH = Raw(b"s" * 172)
FOUR = IP(src="10.20.1.7", dst="10.9.0.3", tos=184) / UDP(sport=16384, dport=20000) / SPEECH
SIX_HEAD = IPv6(src="2001:db8::7", dst="2001:db8:9::3", tc=184)
SIX = SIX_HEAD / UDP(sport=16384, dport=20000) / SPEECH
FOUR_FOUND = [("10.20.1.7", "10.9.0.3", (16384, 20000), 46, 200, 172)]
SIX_FOUND = [("2001:db8::7", "2001:db8:9::3", (16384, 20000), 46, 220, 172)]


@pytest.mark.parametrize(
    "under",
    [
        Ether(),
        Ether() / Dot1Q(vlan=20),
        Ether() / Dot1AD(vlan=7) / Dot1Q(vlan=20),
        Ether() / PPPoE(sessionid=9) / PPP(),
        Ether(type=0x8847) / MPLS(label=16, s=0) / MPLS(label=17, s=1),
    ],
    ids=lambda under: under.summary(),
)
@pytest.mark.parametrize(
    ("packet", "expected"), [(FOUR, FOUR_FOUND), (SIX, SIX_FOUND)], ids=["IPv4", "IPv6"]
)
def test_every_way_down_to_the_datagram_is_gone(under, packet, expected):
    """A datagram is found under whatever lies between it and the wire, as scapy builds it."""
    assert found(under / packet) == expected


def test_options_and_extension_headers_are_stepped_over():
    """IPv4 options and IPv6 extension headers lengthen the header, and nothing else."""
    options = IP(bytes(IP(src="10.20.1.7", dst="10.9.0.3", options=b"\x01" * 8) / UDP() / SPEECH))
    assert found(Ether() / options)[0][4:] == (208, 172)
    extended = SIX_HEAD / IPv6ExtHdrHopByHop() / IPv6ExtHdrDestOpt() / UDP() / SPEECH
    assert found(Ether() / extended)[0][4:] == (236, 172)


@pytest.mark.parametrize(
    ("link_type", "head"),
    [
        (LinkType.RAW, b""),
        (LinkType.IPV4, b""),
        (LinkType.NULL, struct.pack("=I", 2)),
        (LinkType.LOOP, struct.pack("!I", 2)),
        (LinkType.LINUX_SLL, bytes(CookedLinux(proto=0x0800))),
        (LinkType.LINUX_SLL2, struct.pack("!HHIHBB8s", 0x0800, 0, 3, 1, 0, 6, b"")),
    ],
)
def test_every_link_type_is_read(link_type, head):
    """A datagram is found behind each link type's own head."""
    assert found(head + bytes(FOUR), link_type) == FOUR_FOUND


def test_only_the_first_fragment_has_a_udp_header():
    """Later fragments are not mistaken for datagrams; the first one is one."""
    big = IP(src="10.20.1.7", dst="10.9.0.3") / UDP(sport=16384, dport=20000) / Raw(b"s" * 2000)
    first, *later = fragment(big, 1000)
    assert found(Ether() / first)[0][5] == 2000
    assert [found(Ether() / piece) for piece in later] == [[]] * len(later)


@pytest.mark.parametrize("cut", range(len(bytes(Ether() / Dot1Q() / FOUR)) - 172))
def test_a_frame_cut_short_of_its_udp_header_is_passed_over(cut):
    """However little of a frame was captured, nothing is read beyond it."""
    assert found(bytes(Ether() / Dot1Q() / FOUR)[:cut]) == []


def test_lengths_that_contradict_one_another_are_not_believed():
    """A UDP length beyond its IP packet, or below its own header, is no datagram."""
    for length in (0, 7, 300):
        frame = bytearray(ethernet(ip_udp(rtp())))
        struct.pack_into("!H", frame, 14 + 20 + 4, length)
        assert found(frame) == []


@given(st.lists(st.binary(max_size=90), max_size=8), st.sampled_from(LinkType))
def test_any_octets_give_datagrams_that_lie_within_their_frames(frames, link_type):
    """Nothing on the wire makes it fail, or find what lies outside a frame."""
    whole = batch([(START_NS, frame) for frame in frames], link_type)
    of = datagrams(whole)
    end = (whole.offsets + whole.captured)[of.frame]
    assert ((of.at >= whole.offsets[of.frame]) & (of.at + of.captured <= end)).all()
    assert (np.diff(of.frame) > 0).all()


@given(
    source=st.sampled_from(["10.20.1.7", "192.0.2.255", "2001:db8::7"]),
    ports=st.tuples(st.integers(0, 65535), st.integers(0, 65535)),
    dscp=st.integers(0, 63),
    payload=st.integers(0, 400),
    tags=st.lists(st.integers(0, 4095), max_size=2),
)
def test_what_is_found_is_what_dpkt_finds(source, ports, dscp, payload, tags):
    """Addresses, ports, marking and lengths are those that dpkt reads."""
    destination = "2001:db8:9::3" if ":" in source else "10.9.0.3"
    frame = ethernet(ip_udp(bytes(payload), source, destination, ports, dscp), tags)
    ip = dpkt.ethernet.Ethernet(frame).data
    traffic_class = ip.tos if isinstance(ip, dpkt.ip.IP) else ip.fc
    octets = ip.len if isinstance(ip, dpkt.ip.IP) else ip.plen + 40
    ((src, dst, *rest),) = found(frame)
    assert [dpkt.utils.inet_to_str(ip.src), dpkt.utils.inet_to_str(ip.dst)] == [src, dst]
    assert rest == [(ip.data.sport, ip.data.dport), traffic_class >> 2, octets, len(ip.data.data)]
