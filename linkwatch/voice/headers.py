"""Columns of a batch: from each frame down to its UDP datagram.

Headers are numpy layouts, and a whole column of them is gathered at once. A layout is gathered
only where the frame was captured that far, so nothing is ever read outside a frame.
"""

from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
import numpy.typing as npt

from linkwatch.frames import FrameBatch, LinkType, Longs, Octets, gather

Words: TypeAlias = npt.NDArray[np.uint64]
Mask: TypeAlias = npt.NDArray[np.bool_]

TYPE = np.dtype(">u2")
# RFC 791 3.1
IPV4 = np.dtype(
    {
        "names": ["version_ihl", "tos", "total", "fragment", "protocol", "source", "destination"],
        "formats": ["u1", "u1", ">u2", ">u2", "u1", ">u4", ">u4"],
        "offsets": [0, 1, 2, 6, 9, 12, 16],
        "itemsize": 20,
    }
)
# RFC 8200 3
IPV6 = np.dtype(
    [("version_class", ">u2"), ("flow", ">u2"), ("payload", ">u2"), ("next", "u1"), ("hops", "u1")]
    + [(f"{end}_{half}", ">u8") for end in ("source", "destination") for half in ("high", "low")]
)
# RFC 8200 4.2 (next header, length); RFC 8200 4.5 (fragment offset at octet 2)
EXTENSION = np.dtype([("next", "u1"), ("length", "u1"), ("fragment", ">u2")])
# RFC 768
UDP = np.dtype([("source", ">u2"), ("destination", ">u2"), ("length", ">u2"), ("checksum", ">u2")])

ETHERTYPE_IPV4, ETHERTYPE_IPV6 = 0x0800, 0x86DD
ETHERTYPES_VLAN = (0x8100, 0x88A8, 0x9100)
ETHERTYPE_MPLS, ETHERTYPE_PPPOE = 0x8847, 0x8864
PPP_IPV4, PPP_IPV6 = 0x0021, 0x0057
PROTOCOL_UDP, PROTOCOL_FRAGMENT = 17, 44
EXTENSIONS = (0, 43, PROTOCOL_FRAGMENT, 60)  # hop-by-hop, routing, fragment, destination options
MOST_TAGS = 8  # of one frame; more is not traffic that anybody carries voice in
IPV4_MAPPED = np.uint64(0xFFFF << 32)  # RFC 4291 2.5.5.2: ::ffff:0:0/96

# Where the protocol type stands and where the network layer begins, by link type.
TYPED = {
    LinkType.ETHERNET: (12, 14),
    LinkType.LINUX_SLL: (14, 16),
    LinkType.LINUX_SLL2: (0, 20),
}
UNTYPED = {
    LinkType.RAW: 0,
    LinkType.IPV4: 0,
    LinkType.IPV6: 0,
    LinkType.NULL: 4,
    LinkType.LOOP: 4,
}


@dataclass(frozen=True, slots=True)
class Datagrams:
    """The UDP datagrams of a batch, in its order; columns of one length.

    Attributes:
        frame: Which frame of the batch each lies in.
        ends: Source high, source low, destination high, destination low: the addresses as 128-bit
            numbers in two halves, IPv4 as ::ffff:a.b.c.d.
        ports: Source port * 65536 + destination port.
        dscp: Differentiated services code point (RFC 2474).
        ip_octets: Octets of the IP packet by its own length field.
        ip_header: Octets of it before the UDP header.
        at: Where the UDP payload begins in the batch's buffer.
        payload_octets: Octets of UDP payload by the UDP length field.
        captured: How many of these are in the buffer.
    """

    frame: Longs
    ends: tuple[Words, Words, Words, Words]
    ports: Words
    dscp: npt.NDArray[np.uint8]
    ip_octets: Longs
    ip_header: Longs
    at: Longs
    payload_octets: Longs
    captured: Longs

    def __len__(self) -> int:
        return len(self.frame)


def datagrams(batch: FrameBatch) -> Datagrams:
    """Finds the UDP datagrams of a batch; what is not UDP over IP is passed over."""
    at, end, protocol = _network_layer(batch)
    four = _ipv4(batch.octets, at, end, np.flatnonzero(protocol == ETHERTYPE_IPV4))
    six = _ipv6(batch.octets, at, end, np.flatnonzero(protocol == ETHERTYPE_IPV6))
    if not len(six):
        return four
    if not len(four):
        return six
    return _merged(four, six)


def _network_layer(batch: FrameBatch) -> tuple[Longs, Longs, Longs]:
    """Returns where each frame's network layer begins, where its octets end, and its EtherType."""
    octets, end = batch.octets, batch.offsets + batch.captured
    if batch.link_type in UNTYPED:
        at = batch.offsets + UNTYPED[batch.link_type]
        protocol = _by_version(octets, at, end)
    else:
        type_at, header = TYPED[batch.link_type]
        at = batch.offsets + header
        protocol = _types(octets, batch.offsets + type_at, at <= end)
    for _ in range(MOST_TAGS):
        if ((protocol == ETHERTYPE_IPV4) | (protocol == ETHERTYPE_IPV6)).all():
            break
        tagged = np.flatnonzero(np.isin(protocol, (*ETHERTYPES_VLAN, ETHERTYPE_MPLS)))
        session = np.flatnonzero(protocol == ETHERTYPE_PPPOE)
        if not len(tagged) and not len(session):
            break
        _step_over_tags(octets, at, end, protocol, tagged)
        _step_over_pppoe(octets, at, end, protocol, session)
    return at, end, protocol


def _types(octets: Octets, at: Longs, there: Mask) -> Longs:
    """Returns the 16-bit types at these places, 0 where they are not there."""
    if there.all():
        return gather(octets, at, TYPE).astype(np.int64)
    types = np.zeros(len(at), np.int64)
    types[there] = gather(octets, at[there], TYPE)
    return types


def _by_version(octets: Octets, at: Longs, end: Longs) -> Longs:
    """Returns the EtherType that the first four bits of each packet stand for, else 0."""
    protocol = np.zeros(len(at), np.int64)
    there = np.flatnonzero(at < end)
    version = octets[at[there]] >> 4
    protocol[there[version == 4]] = ETHERTYPE_IPV4
    protocol[there[version == 6]] = ETHERTYPE_IPV6
    return protocol


def _step_over_tags(octets: Octets, at: Longs, end: Longs, protocol: Longs, which: Longs) -> None:
    """Moves over one VLAN tag (IEEE 802.1Q) or one MPLS label (RFC 3032 2.1), four octets each."""
    here = at[which]
    whole = here + 4 <= end[which]
    protocol[which[~whole]] = 0
    which, here = which[whole], here[whole]
    at[which] += 4
    label = protocol[which] == ETHERTYPE_MPLS
    tags = which[~label]
    protocol[tags] = gather(octets, here[~label] + 2, TYPE)
    bottom = which[label][octets[here[label] + 2] & 1 == 1]
    protocol[bottom] = _by_version(octets, at[bottom], end[bottom])


def _step_over_pppoe(octets: Octets, at: Longs, end: Longs, protocol: Longs, which: Longs) -> None:
    """Moves over a PPPoE session header and the PPP protocol (RFC 2516 4), eight octets."""
    here = at[which]
    whole = here + 8 <= end[which]
    protocol[which] = 0
    which, here = which[whole], here[whole]
    at[which] += 8
    carried = gather(octets, here + 6, TYPE)
    protocol[which[carried == PPP_IPV4]] = ETHERTYPE_IPV4
    protocol[which[carried == PPP_IPV6]] = ETHERTYPE_IPV6


def _ipv4(octets: Octets, at: Longs, end: Longs, frame: Longs) -> Datagrams:
    """Returns the datagrams in the IPv4 packets among these frames."""
    frame = frame[at[frame] + IPV4.itemsize <= end[frame]]
    here = at[frame]
    row = gather(octets, here, IPV4)
    header = (row["version_ihl"] & 15).astype(np.int64) * 4
    total = row["total"].astype(np.int64)
    is_udp = (row["version_ihl"] >> 4 == 4) & (row["protocol"] == PROTOCOL_UDP) & (header >= 20)
    # The first fragment tells the UDP header; those after it have none.
    is_udp &= row["fragment"] & 0x1FFF == 0
    is_udp &= (total >= header + UDP.itemsize) & (here + header + UDP.itemsize <= end[frame])
    keep = slice(None) if is_udp.all() else np.flatnonzero(is_udp)
    row = row[keep]
    nothing = np.zeros(len(row), np.uint64)
    source = row["source"] | IPV4_MAPPED
    destination = row["destination"] | IPV4_MAPPED
    return _datagrams(
        octets,
        end,
        frame[keep],
        here[keep],
        (nothing, source, nothing, destination),
        (row["tos"] >> 2).astype(np.uint8),
        total[keep],
        header[keep],
        fragmented=row["fragment"] & 0x2000 != 0,
    )


def _ipv6(octets: Octets, at: Longs, end: Longs, frame: Longs) -> Datagrams:
    """Returns the datagrams in the IPv6 packets among these frames."""
    frame = frame[at[frame] + IPV6.itemsize <= end[frame]]
    here = at[frame]
    row = gather(octets, here, IPV6)
    header = np.full(len(row), IPV6.itemsize, np.int64)
    following = row["next"].astype(np.int64)
    fragmented = np.zeros(len(row), np.bool_)
    for _ in range(MOST_TAGS):
        more = np.flatnonzero(np.isin(following, EXTENSIONS))
        if not len(more):
            break
        whole = here[more] + header[more] + 8 <= end[frame[more]]
        following[more[~whole]] = -1
        more = more[whole]
        step = gather(octets, here[more] + header[more], EXTENSION)
        is_fragment = following[more] == PROTOCOL_FRAGMENT
        later = is_fragment & (step["fragment"] & 0xFFF8 != 0)
        fragmented[more] |= is_fragment
        header[more] += np.where(is_fragment, 8, (step["length"].astype(np.int64) + 1) * 8)
        following[more] = np.where(later, -1, step["next"].astype(np.int64))
    total = row["payload"].astype(np.int64) + IPV6.itemsize
    is_udp = (row["version_class"] >> 12 == 6) & (following == PROTOCOL_UDP)
    is_udp &= (total >= header + UDP.itemsize) & (here + header + UDP.itemsize <= end[frame])
    keep = np.flatnonzero(is_udp)
    row = row[keep]
    halves = ("source_high", "source_low", "destination_high", "destination_low")
    a, b, c, d = (row[half].astype(np.uint64) for half in halves)
    return _datagrams(
        octets,
        end,
        frame[keep],
        here[keep],
        (a, b, c, d),
        (row["version_class"] >> 6 & 0x3F).astype(np.uint8),
        total[keep],
        header[keep],
        fragmented=fragmented[keep],
    )


def _datagrams(
    octets: Octets,
    end: Longs,
    frame: Longs,
    here: Longs,
    ends: tuple[Words, Words, Words, Words],
    dscp: npt.NDArray[np.uint8],
    ip_octets: Longs,
    ip_header: Longs,
    *,
    fragmented: Mask,
) -> Datagrams:
    """Reads the UDP headers behind these IP headers, and leaves out those that contradict them."""
    udp = gather(octets, here + ip_header, UDP)
    length = udp["length"].astype(np.int64)
    right = (length >= UDP.itemsize) & ((length <= ip_octets - ip_header) | fragmented)
    ports = udp["source"].astype(np.uint64) << np.uint64(16) | udp["destination"]
    at = here + ip_header + UDP.itemsize
    payload = length - UDP.itemsize
    captured = np.minimum(end[frame] - at, payload)
    found = Datagrams(frame, ends, ports, dscp, ip_octets, ip_header, at, payload, captured)
    return found if right.all() else chosen(found, np.flatnonzero(right))


def chosen(found: Datagrams, which: Longs) -> Datagrams:
    """Returns the datagrams with these indexes, in that order."""
    a, b, c, d = (half[which] for half in found.ends)
    return Datagrams(
        found.frame[which],
        (a, b, c, d),
        found.ports[which],
        found.dscp[which],
        found.ip_octets[which],
        found.ip_header[which],
        found.at[which],
        found.payload_octets[which],
        found.captured[which],
    )


def _merged(one: Datagrams, other: Datagrams) -> Datagrams:
    """Returns both in the order of their frames."""
    a, b, c, d = (np.concatenate(pair) for pair in zip(one.ends, other.ends, strict=True))
    both = Datagrams(
        np.concatenate((one.frame, other.frame)),
        (a, b, c, d),
        np.concatenate((one.ports, other.ports)),
        np.concatenate((one.dscp, other.dscp)),
        np.concatenate((one.ip_octets, other.ip_octets)),
        np.concatenate((one.ip_header, other.ip_header)),
        np.concatenate((one.at, other.at)),
        np.concatenate((one.payload_octets, other.payload_octets)),
        np.concatenate((one.captured, other.captured)),
    )
    return chosen(both, np.argsort(both.frame, kind="stable"))
