"""Layers of Ethernet: PPPoE, tags and the frame itself."""

from dataclasses import dataclass
from typing import ClassVar

from typing_extensions import override

from linkwatch.plan.layers.layer import (
    ONE_HOP,
    ROUTED_OR_LABELLED,
    Layer,
    choice,
    sum_in_words,
)
from linkwatch.plan.layers.packet import Count, Kind, Packet, at_least


@dataclass(frozen=True, slots=True)
class Pppoe(Layer):
    """PPP over Ethernet (RFC 2516)."""

    name: ClassVar = "pppoe"
    takes: ClassVar = ONE_HOP | {Kind.FRAGMENT}

    @override
    def around(self, packet: Packet[Count]) -> Packet[Count]:
        return packet.grown(2 + 6, Kind.SESSION)

    @override
    def account(self, kind: Kind) -> str:
        return sum_in_words(("PPP protocol", 2), ("PPPoE", 6))


@dataclass(frozen=True, slots=True)
class Vlan(Layer):
    """IEEE 802.1Q tags: in the frame when listed before ethernet, put on a made one after it.

    Attributes:
        tags: How many.
    """

    name: ClassVar = "vlan"
    takes: ClassVar = ROUTED_OR_LABELLED | {Kind.SESSION, Kind.TAGGED, Kind.FRAME}

    tags: int = choice(1, 2, 3, 4)

    @override
    def around(self, packet: Packet[Count]) -> Packet[Count]:
        return packet.grown(4 * self.tags, Kind.FRAME if packet.kind is Kind.FRAME else Kind.TAGGED)

    @override
    def account(self, kind: Kind) -> str:
        return sum_in_words(("tag" if self.tags == 1 else f"{self.tags} tags", 4 * self.tags))


@dataclass(frozen=True, slots=True)
class Ethernet(Layer):
    """An Ethernet frame, which is at least 64 octets long (IEEE 802.3).

    Attributes:
        preamble: Whether to count the preamble and start delimiter.
        gap: Whether to count the gap between frames.
    """

    name: ClassVar = "ethernet"
    takes: ClassVar = ROUTED_OR_LABELLED | {Kind.SESSION, Kind.TAGGED}

    preamble: bool = choice(False, True)
    gap: bool = choice(False, True)

    @property
    def _wire(self) -> int:
        return 8 * self.preamble + 12 * self.gap

    @override
    def around(self, packet: Packet[Count]) -> Packet[Count]:
        bare = packet.octets + 14
        frame = at_least(bare + 4, 64)
        # Preamble and gap belong to a wire: such a frame is not carried any further.
        kind = Kind.DONE if self._wire else Kind.FRAME
        return Packet(frame + self._wire, bare, packet.header, kind)

    @override
    def account(self, kind: Kind) -> str:
        wire = ("preamble", 8 * self.preamble), ("gap", 12 * self.gap)
        return sum_in_words(("header", 14), ("FCS", 4), *wire) + "; 64 at least"
