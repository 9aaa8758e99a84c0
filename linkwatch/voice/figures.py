"""What is known of a stream at one moment: the record that calls, alarms and faces read."""

from typing import NamedTuple


class StreamState(NamedTuple):
    """One RTP direction as it stands.

    Attributes:
        source, destination: Address and port, such as "10.20.1.7:16384".
        ssrc: The synchronisation source.
        payload_type: The payload type of most of its packets.
        media: "audio", "video" or "unknown".
        codec: Codec name, or "unknown".
        codec_evidence: "sdp", "static", "plan", "inferred" or "unknown".
        packet_ms: Packetisation, or None while it is not known.
        packets, expected, lost, lost_a3, duplicates, reordered: Counts; see docs/figures.md.
        jitter_ms, jitter_mean_ms, jitter_max_ms: RFC 3550 jitter at the end, over all, at worst;
            None while the sender's clock is not known.
        dscp: The marking of its last packet.
        dscp_steady: False where its packets carried more than one marking.
        first, last: When its first and its last packet were seen, nanoseconds since 1970 UTC.
        ip_octets: Octets of all its IP packets.
        link_octets: The same after the framing of the first link that it crosses.
        link_kbps: Its rate on that link over its lifetime.
        active: Whether it sends now.
    """

    source: str
    destination: str
    ssrc: int
    payload_type: int
    media: str
    codec: str
    codec_evidence: str
    packet_ms: float | None
    packets: int
    expected: int
    lost: int
    lost_a3: int
    duplicates: int
    reordered: int
    jitter_ms: float | None
    jitter_mean_ms: float | None
    jitter_max_ms: float | None
    dscp: int
    dscp_steady: bool
    first: int
    last: int
    ip_octets: int
    link_octets: float
    link_kbps: float
    active: bool

    @property
    def loss_percent(self) -> float:
        """Packets lost of those expected, in percent."""
        return 100.0 * self.lost / self.expected if self.expected else 0.0
