"""A packet on its way out to the line, as the layers of a framing pass it on."""

from dataclasses import dataclass
from enum import Enum
from typing import Generic, TypeVar

from linkwatch.frames import Longs

# One definition of every layer serves one packet and a column of packets alike.
Count = TypeVar("Count", int, Longs)


class Kind(Enum):
    """What a packet has become; the value is how an error names it."""

    VOICE = "the voice packet"
    IP = "a tunnel's IP packet"
    COMPRESSED = "a packet with compressed headers"
    LABELLED = "a labelled packet"
    FRAGMENT = "a multilink fragment"
    SESSION = "a PPPoE session's packet"
    TAGGED = "a tagged packet"
    FRAME = "an Ethernet frame"
    PPP = "a PPP frame"
    DONE = "a finished frame"


@dataclass(frozen=True, slots=True)
class Packet(Generic[Count]):
    """One packet, or a column of packets.

    Attributes:
        octets: Its octets so far.
        bare: The same without what only its own line needs (padding, FCS, flags): what is left of
            it where another line carries it.
        header: Octets of its outermost IP header.
        kind: What it has become.
    """

    octets: Count
    bare: Count
    header: Count
    kind: Kind

    def grown(self, octets: int, kind: Kind) -> "Packet[Count]":
        """Returns the packet with so many more octets around it."""
        return Packet(self.octets + octets, self.bare + octets, self.header, kind)


def at_least(count: Count, least: int) -> Count:
    """Returns the count, raised to the least; written so that one line serves a column too."""
    return count + (least - count) * (count < least)


def filled(count: Count, block: int) -> Count:
    """Returns the count rounded up to whole blocks."""
    return -(-count // block) * block
