"""Builders of frames and batches: each takes only what a test cares about."""

import struct
from ipaddress import ip_address

import numpy as np

from linkwatch.frames import FrameBatch, LinkType

START_NS = 1_800_000_000 * 10**9
MS = 1_000_000
PHONE, GATEWAY = "10.20.1.7", "10.9.0.3"


def rtp(
    sequence=0, timestamp=0, ssrc=0x1234, pt=0, payload=160, marker=False, csrcs=0, extension=None
):
    """Returns an RTP packet (RFC 3550 5.1) with `payload` octets of silence."""
    flags = 0x80 | csrcs | (0x10 if extension is not None else 0)
    second = pt | (0x80 if marker else 0)
    packet = struct.pack("!BBHII", flags, second, sequence % 65536, timestamp % 2**32, ssrc)
    packet += bytes(4 * csrcs)
    if extension is not None:
        packet += struct.pack("!HH", 0xBEDE, extension) + bytes(4 * extension)
    return packet + b"\xd5" * payload


def ip_udp(content, source=PHONE, destination=GATEWAY, ports=(16384, 20000), dscp=46):
    """Returns an IPv4 or IPv6 packet with a UDP datagram."""
    a, b = ip_address(source), ip_address(destination)
    udp = struct.pack("!HHHH", *ports, 8 + len(content), 0) + content
    if a.version == 4:
        head = (0x45, dscp << 2, 20 + len(udp), 7, 0x4000, 64, 17, 0, a.packed, b.packed)
        return struct.pack("!BBHHHBBH4s4s", *head) + udp
    head = (6 << 28 | dscp << 22, len(udp), 17, 64, a.packed, b.packed)
    return struct.pack("!IHBB16s16s", *head) + udp


def ethernet(packet, tags=()):
    """Returns an Ethernet frame with the given VLAN tags, outermost first."""
    kind = 0x0800 if packet[0] >> 4 == 4 else 0x86DD
    frame = bytes.fromhex("020000000001020000000002")
    for tag in tags:
        frame += struct.pack("!HH", 0x8100, tag)
    return frame + struct.pack("!H", kind) + packet


def batch(frames, link_type=LinkType.ETHERNET, snaplen=65535):
    """Returns a batch of frames, each given as (time in ns, octets)."""
    times = np.array([time for time, _ in frames], np.int64)
    original = np.array([len(octets) for _, octets in frames], np.int64)
    pieces = [octets[:snaplen] for _, octets in frames]
    captured = np.array([len(piece) for piece in pieces], np.int64)
    offsets = np.concatenate(([0], np.cumsum(captured)[:-1])).astype(np.int64)
    buffer = np.frombuffer(b"".join(pieces), np.uint8)
    until = int(times.max()) + 1 if len(times) else START_NS
    return FrameBatch(buffer, offsets[: len(times)], captured, original, times, link_type, until)


def speech(
    packets=50,
    packet_ms=20,
    clock_hz=8000,
    start_ns=START_NS,
    first_sequence=100,
    lose=(),
    wrap=ethernet,
    source=PHONE,
    destination=GATEWAY,
    ports=(16384, 20000),
    dscp=46,
    **header,
):
    """Returns the frames of a steady stream, (time in ns, octets) each, less those to lose."""
    ticks = packet_ms * clock_hz // 1000
    return [
        (
            start_ns + i * packet_ms * MS,
            wrap(
                ip_udp(
                    rtp(first_sequence + i, 4000 + i * ticks, **header),
                    source,
                    destination,
                    ports,
                    dscp,
                )
            ),
        )
        for i in range(packets)
        if i not in lose
    ]


def both_ways(source=PHONE, destination=GATEWAY, ports=(16384, 20000), **speech_of):
    """Returns the frames of a call, both directions, in the order of time."""
    there = speech(source=source, destination=destination, ports=ports, **speech_of)
    speech_of["ssrc"] = speech_of.get("ssrc", 0x1234) + 1
    back = speech(source=destination, destination=source, ports=ports[::-1], **speech_of)
    return sorted(there + back, key=lambda frame: frame[0])
