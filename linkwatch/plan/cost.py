"""The cost of a call: codec, packetisation and framing -> octets, packets/s, kbit/s."""

from dataclasses import dataclass

from linkwatch.errors import InputError
from linkwatch.plan.codecs import Codec, find_codec
from linkwatch.plan.framing import Framing
from linkwatch.plan.layers.layer import IPV4, IPV6, RTP, UDP

LONGEST_TAG = 64  # octets: 16 is the longest tag in use, an MKI may stand before it (RFC 3711 3.1)


@dataclass(frozen=True, slots=True)
class CallCost:
    """What one direction of one call costs on a link.

    Attributes:
        codec: The codec's name.
        packet_ms: The packetisation, milliseconds.
        payload_octets: Speech in a packet.
        ip_octets: The IP total length.
        link_octets: The IP packet after framing.
        packets_per_second: Packets a second while somebody speaks.
        kbps: kbit/s on the link.
    """

    codec: str
    packet_ms: float
    payload_octets: int
    ip_octets: int
    link_octets: int
    packets_per_second: float
    kbps: float


def call_cost(
    codec: Codec | str,
    packet_ms: float | None,
    framing: Framing,
    *,
    ipv6: bool = False,
    srtp_tag_octets: int = 0,
) -> CallCost:
    """Returns what one direction of one call costs.

    Args:
        codec: The codec, or its name.
        packet_ms: The packetisation, milliseconds; None is the codec's default.
        framing: The link's framing.
        ipv6: Whether the call runs over IPv6.
        srtp_tag_octets: What SRTP adds to each packet: its tag, and its key identifier if sent.

    Raises:
        InputError: An unknown codec, half a frame, or a tag that cannot be.
    """
    if isinstance(codec, str):
        codec = find_codec(codec, packet_ms)
    if packet_ms is None:
        packet_ms = codec.default_packet_ms
    if not 0 <= srtp_tag_octets <= LONGEST_TAG:
        raise InputError(
            "SRTP tag", got=f"{srtp_tag_octets} octets", wanted=f"0 to {LONGEST_TAG}; 10 is usual"
        )
    payload = codec.payload_octets(packet_ms)
    header = IPV6 if ipv6 else IPV4
    ip_octets = header + UDP + RTP + payload + srtp_tag_octets
    link_octets = framing.link_octets(ip_octets, header)
    return CallCost(
        codec=codec.name,
        packet_ms=packet_ms,
        payload_octets=payload,
        ip_octets=ip_octets,
        link_octets=link_octets,
        packets_per_second=1000 / packet_ms,
        kbps=link_octets * 8 / packet_ms,
    )
