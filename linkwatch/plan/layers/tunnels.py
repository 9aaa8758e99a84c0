"""Layers that a router puts around a packet: tunnels and labels."""

from dataclasses import dataclass
from typing import ClassVar

from typing_extensions import override

from linkwatch.plan.layers.layer import (
    IPV4,
    IPV6,
    ROUTED,
    ROUTED_OR_LABELLED,
    UDP,
    Layer,
    choice,
    sum_in_words,
)
from linkwatch.plan.layers.packet import Count, Kind, Packet, filled


class _Tunnel(Layer):
    """A tunnel puts an IP header of its own around the packet."""

    __slots__ = ()

    takes: ClassVar = ROUTED

    outer_ip: int

    @property
    def _outer(self) -> int:
        return IPV6 if self.outer_ip == 6 else IPV4

    def _delivered(self, packet: Packet[Count], octets: Count) -> Packet[Count]:
        """Returns what a tunnel makes of a packet, behind an outer header."""
        total = octets + self._outer
        return Packet(total, total, packet.header * 0 + self._outer, Kind.IP)


@dataclass(frozen=True, slots=True)
class Ipip(_Tunnel):
    """IP in IP (RFC 2003, RFC 2473).

    Attributes:
        outer_ip: The version of the outer header.
    """

    name: ClassVar = "ipip"

    outer_ip: int = choice(4, 6)

    @override
    def around(self, packet: Packet[Count]) -> Packet[Count]:
        return self._delivered(packet, packet.octets)

    @override
    def account(self, kind: Kind) -> str:
        return f"outer IPv{self.outer_ip} {self._outer}"


@dataclass(frozen=True, slots=True)
class Gre(_Tunnel):
    """Generic routing encapsulation (RFC 2784, RFC 2890).

    Attributes:
        key, sequence, checksum: Which optional fields are sent.
        outer_ip: The version of the delivery header.
    """

    name: ClassVar = "gre"

    key: bool = choice(False, True)
    sequence: bool = choice(False, True)
    checksum: bool = choice(False, True)
    outer_ip: int = choice(4, 6)

    @property
    def _header(self) -> int:
        return 4 + 4 * (self.key + self.sequence + self.checksum)

    @override
    def around(self, packet: Packet[Count]) -> Packet[Count]:
        return self._delivered(packet, packet.octets + self._header)

    @override
    def account(self, kind: Kind) -> str:
        return sum_in_words(("GRE", self._header), (f"delivery IPv{self.outer_ip}", self._outer))


@dataclass(frozen=True, slots=True)
class Cipher:
    """What an ESP cipher suite adds, octets.

    Attributes:
        iv: The initialisation vector.
        block: What is encrypted comes in multiples of it.
        icv: The integrity check value.
    """

    iv: int
    block: int
    icv: int


# RFC 4106 3, 6; RFC 3602 2.1, 2.4 with RFC 2404 or RFC 4868; RFC 7634 2; RFC 2451 with RFC 2404.
CIPHERS = {
    "aes-gcm": Cipher(iv=8, block=4, icv=16),
    "aes-cbc-sha1": Cipher(iv=16, block=16, icv=12),
    "aes-cbc-sha256": Cipher(iv=16, block=16, icv=16),
    "chacha20": Cipher(iv=8, block=4, icv=16),
    "3des-sha1": Cipher(iv=8, block=8, icv=12),
}


@dataclass(frozen=True, slots=True)
class Esp(_Tunnel):
    """Encrypted IP (RFC 4303).

    Attributes:
        cipher: The cipher suite.
        mode: Tunnel mode wraps the whole packet; transport mode keeps its IP header outside.
        natt: Whether it travels in UDP, to pass an address translator (RFC 3948).
        outer_ip: The version of the outer header in tunnel mode.
    """

    name: ClassVar = "esp"

    cipher: str = choice(*CIPHERS)
    mode: str = choice("tunnel", "transport")
    natt: bool = choice(False, True)
    outer_ip: int = choice(4, 6)

    @property
    def _clear(self) -> int:
        """What stands outside the encrypted part, without an outer header."""
        cipher = CIPHERS[self.cipher]
        return 8 + cipher.iv + cipher.icv + UDP * self.natt

    def _encrypted(self, octets: Count) -> Count:
        return filled(octets + 2, CIPHERS[self.cipher].block)

    @override
    def around(self, packet: Packet[Count]) -> Packet[Count]:
        if self.mode == "tunnel":
            return self._delivered(packet, self._encrypted(packet.octets) + self._clear)
        inner = self._encrypted(packet.octets - packet.header) + self._clear
        octets = inner + packet.header
        return Packet(octets, octets, packet.header, Kind.IP)

    @override
    def account(self, kind: Kind) -> str:
        cipher = CIPHERS[self.cipher]
        outer = self._outer if self.mode == "tunnel" else 0
        parts = sum_in_words(
            ("ESP", 8),
            ("IV", cipher.iv),
            ("trailer", 2),
            ("ICV", cipher.icv),
            ("UDP", UDP * self.natt),
            (f"IPv{self.outer_ip}", outer),
        )
        return f"{parts}; padded to {cipher.block}"


@dataclass(frozen=True, slots=True)
class Mpls(Layer):
    """A stack of labels (RFC 3032).

    Attributes:
        labels: How many.
    """

    name: ClassVar = "mpls"
    takes: ClassVar = ROUTED_OR_LABELLED

    labels: int = choice(1, 2, 3, 4, 5, 6, 7, 8)

    @override
    def around(self, packet: Packet[Count]) -> Packet[Count]:
        return packet.grown(4 * self.labels, Kind.LABELLED)

    @override
    def account(self, kind: Kind) -> str:
        return sum_in_words(
            ("label" if self.labels == 1 else f"{self.labels} labels", 4 * self.labels)
        )
