"""Layers of serial lines: compressed headers, PPP, HDLC, Frame Relay."""

from dataclasses import dataclass
from typing import ClassVar

from typing_extensions import override

from linkwatch.plan.layers.layer import (
    IPV6,
    ONE_HOP,
    ROUTED,
    RTP,
    UDP,
    Layer,
    choice,
    sum_in_words,
)
from linkwatch.plan.layers.packet import Count, Kind, Packet


@dataclass(frozen=True, slots=True)
class Crtp(Layer):
    """Compressed RTP headers (RFC 2508): the steady state, without the full headers of a refresh.

    Attributes:
        udp_checksum: Whether the speaker sends one; then it travels in full.
    """

    name: ClassVar = "crtp"
    takes: ClassVar = frozenset({Kind.VOICE})

    udp_checksum: bool = choice(False, True)

    @property
    def _left(self) -> int:
        return 4 if self.udp_checksum else 2

    @override
    def around(self, packet: Packet[Count]) -> Packet[Count]:
        octets = packet.octets - packet.header - (UDP + RTP - self._left)
        return Packet(octets, octets, packet.header, Kind.COMPRESSED)

    @override
    def account(self, kind: Kind) -> str:
        checksum = ", UDP checksum kept" if self.udp_checksum else ""
        return f"IP, UDP and RTP headers become {self._left}{checksum}"


@dataclass(frozen=True, slots=True)
class Mlppp(Layer):
    """Multilink PPP with every packet in one fragment (RFC 1990); the links below it are ppp.

    Attributes:
        sequence: Long (24 bit) or short (12 bit) sequence numbers.
        pfc: Whether the inner protocol field is compressed.
    """

    name: ClassVar = "mlppp"
    takes: ClassVar = ONE_HOP

    sequence: str = choice("long", "short")
    pfc: bool = choice(False, True)

    @property
    def _parts(self) -> tuple[tuple[str, int], ...]:
        multilink = 4 if self.sequence == "long" else 2
        return ("inner protocol", 1 if self.pfc else 2), ("multilink", multilink)

    @override
    def around(self, packet: Packet[Count]) -> Packet[Count]:
        return packet.grown(sum(octets for _, octets in self._parts), Kind.FRAGMENT)

    @override
    def account(self, kind: Kind) -> str:
        return sum_in_words(*self._parts)


@dataclass(frozen=True, slots=True)
class Ppp(Layer):
    """PPP in HDLC-like framing (RFC 1661, RFC 1662); over cells only its protocol field is left.

    Attributes:
        flags: Flags a frame: neighbours share one on a busy line, an idle line needs two.
        acfc: Whether address and control are left out.
        pfc: Whether the protocol field is compressed to one octet.
        fcs: Bits of the frame check sequence.
    """

    name: ClassVar = "ppp"
    takes: ClassVar = ONE_HOP | {Kind.FRAGMENT}

    flags: int = choice(1, 2)
    acfc: bool = choice(False, True)
    pfc: bool = choice(False, True)
    fcs: int = choice(16, 32)

    @property
    def _protocol(self) -> int:
        return 1 if self.pfc else 2

    @property
    def _hdlc(self) -> tuple[tuple[str, int], ...]:
        address = 0 if self.acfc else 2
        return ("flags", self.flags), ("address and control", address), ("FCS", self.fcs // 8)

    @override
    def around(self, packet: Packet[Count]) -> Packet[Count]:
        bare = packet.octets + self._protocol
        framed = bare + sum(octets for _, octets in self._hdlc)
        return Packet(framed, bare, packet.header, Kind.PPP)

    @override
    def account(self, kind: Kind) -> str:
        return sum_in_words(*self._hdlc[:2], ("protocol", self._protocol), *self._hdlc[2:])


@dataclass(frozen=True, slots=True)
class Hdlc(Layer):
    """A serial line with a four-octet header that ends in an EtherType.

    Attributes:
        flags: Flags a frame, as for ppp.
    """

    name: ClassVar = "hdlc"
    takes: ClassVar = ONE_HOP

    flags: int = choice(1, 2)

    @override
    def around(self, packet: Packet[Count]) -> Packet[Count]:
        return packet.grown(self.flags + 4 + 2, Kind.DONE)

    @override
    def account(self, kind: Kind) -> str:
        return sum_in_words(("flags", self.flags), ("header", 4), ("FCS", 2))


@dataclass(frozen=True, slots=True)
class FrameRelay(Layer):
    """Frame Relay with the encapsulation of RFC 2427.

    IPv4 has a protocol identifier of its own, one octet, and compressed headers are counted alike;
    IPv6 needs the longer header that names an EtherType.

    Attributes:
        address: Octets of the address field.
        flags: Flags a frame, as for ppp.
    """

    name: ClassVar = "frame-relay"
    takes: ClassVar = ROUTED | {Kind.COMPRESSED}

    address: int = choice(2, 3, 4)
    flags: int = choice(1, 2)

    @override
    def around(self, packet: Packet[Count]) -> Packet[Count]:
        framed = packet.octets + (self.flags + self.address + 1 + 1 + 2)
        if packet.kind is not Kind.COMPRESSED:
            # An IPv4 header of 40 octets would be half options; no speaker sends that.
            framed = framed + 6 * (packet.header >= IPV6)
        return Packet(framed, framed, packet.header, Kind.DONE)

    @override
    def account(self, kind: Kind) -> str:
        line = ("flags", self.flags), ("address", self.address), ("control", 1)
        return sum_in_words(*line, ("protocol", 1), ("FCS", 2)) + "; 6 more for IPv6"
