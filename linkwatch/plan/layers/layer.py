"""What every layer has, and the sizes that several need."""

from collections.abc import Mapping
from dataclasses import field, fields
from typing import Any, ClassVar, TypeVar, cast

from linkwatch.plan.layers.packet import Count, Kind, Packet

Choice = TypeVar("Choice", bool, int, str)

IPV4, IPV6 = 20, 40  # octets of the headers without options (RFC 791 3.1; RFC 8200 3)
UDP, RTP = 8, 12  # RFC 768; RFC 3550 5.1

ROUTED = frozenset({Kind.VOICE, Kind.IP})
ROUTED_OR_LABELLED = ROUTED | {Kind.LABELLED}
ONE_HOP = ROUTED_OR_LABELLED | {Kind.COMPRESSED}  # what a line between two neighbours carries


class Layer:
    """What every layer has.

    Attributes:
        name: Its name in a plan.
        takes: The kinds of packet that it can be put around.
    """

    __slots__ = ()

    name: ClassVar[str]
    takes: ClassVar[frozenset[Kind]]

    def around(self, packet: Packet[Count]) -> Packet[Count]:
        """Returns the packet with this layer around it."""
        raise NotImplementedError

    def account(self, kind: Kind) -> str:
        """Returns in a few words what this layer adds around a packet of that kind."""
        raise NotImplementedError


def choice(*values: Choice) -> Choice:
    """Returns an option's field: these values are allowed, and the first is the default."""
    return field(default=values[0], metadata={"allowed": values})


def options_of(layer: type[Layer]) -> Mapping[str, tuple[object, ...]]:
    """Returns the options of a layer, each with the values allowed, the default first."""
    return {option.name: option.metadata["allowed"] for option in fields(cast("Any", layer))}


def sum_in_words(*parts: tuple[str, int]) -> str:
    """Returns the parts of a layer that are there, each with its octets."""
    return ", ".join(f"{name} {octets}" for name, octets in parts if octets)
