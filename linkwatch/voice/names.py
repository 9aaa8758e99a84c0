"""What never changes of a stream: its two ends, in numbers and in words."""

from collections.abc import Callable
from ipaddress import IPv6Address
from typing import NamedTuple


class Names(NamedTuple):
    """What never changes of a stream: its ends in words and numbers, its SSRC, its framing."""

    source: str
    destination: str
    ends: tuple[tuple[int, int], tuple[int, int]]
    ssrc: int
    framing: int


def names_of(key: tuple[int, ...], framing_of: Callable[[str, str], int]) -> Names:
    """Returns the names of the stream with this key (see `RtpPackets`)."""
    source_high, source_low, destination_high, destination_low, ports_ssrc = key
    source = source_high << 64 | source_low
    destination = destination_high << 64 | destination_low
    source_port, destination_port = ports_ssrc >> 48, ports_ssrc >> 32 & 0xFFFF
    here, there = address_text(source), address_text(destination)
    return Names(
        end_text(here, source_port),
        end_text(there, destination_port),
        ((source, source_port), (destination, destination_port)),
        ports_ssrc & 0xFFFF_FFFF,
        framing_of(here, there),
    )


def address_text(number: int) -> str:
    """Returns an address as people write it; IPv4 comes as ::ffff:a.b.c.d."""
    address = IPv6Address(number)
    return str(address.ipv4_mapped or address)


def end_text(address: str, port: int) -> str:
    """Returns an address and a port as people write them."""
    return f"[{address}]:{port}" if ":" in address else f"{address}:{port}"
