"""A framing: the layers around an IP packet, from the packet outwards to the line.

The planner's cost of a call and the measured cost of every packet seen go through the one function
here, so what was promised and what is seen can be compared to the octet.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields
from typing import Any, NamedTuple, cast, overload

from linkwatch.errors import InputError
from linkwatch.frames import Longs
from linkwatch.plan.layers import LAYERS, make_layer
from linkwatch.plan.layers.layer import IPV4, Layer
from linkwatch.plan.layers.packet import Count, Kind, Packet
from linkwatch.plan.wording import one_of, quoted

BARE = "ip"
MOST_LAYERS = 12
PROBE = 200  # octets of a packet that tries the layers out; any would do

LayerSpec = str | Mapping[str, Mapping[str, object]]

UNFINISHED = {Kind.COMPRESSED, Kind.LABELLED, Kind.FRAGMENT, Kind.SESSION, Kind.TAGGED}


class LayerError(InputError):
    """A layer that there is not, or that cannot stand where it stands.

    Attributes:
        index: Which layer of the framing, from 0.
    """

    def __init__(self, index: int, *, got: str, wanted: str = "", remedy: str = "") -> None:
        super().__init__(f"framing, layer {index + 1}", got=got, wanted=wanted, remedy=remedy)
        self.index = index


class Step(NamedTuple):
    """How a layer changes the octets of a packet.

    Attributes:
        layer: The layer's name.
        octets: The octets with it.
        account: What it adds, in a few words.
    """

    layer: str
    octets: int
    account: str


@dataclass(frozen=True, slots=True)
class Framing:
    """Layers from the IP packet outwards; none at all is the bare IP packet.

    Attributes:
        layers: The layers, the innermost first.

    Raises:
        LayerError: The layers cannot be put around one another so.
    """

    layers: tuple[Layer, ...] = ()

    def __post_init__(self) -> None:
        packet = _voice(PROBE, IPV4)
        for index, layer in enumerate(self.layers):
            if packet.kind not in layer.takes:
                raise _misplaced(index, layer, packet.kind)
            packet = layer.around(packet)
        if packet.kind in UNFINISHED:
            last = len(self.layers) - 1
            got = f"{self.layers[last].name} as the outermost layer"
            wanted = f"{_carriers(packet.kind)} around {packet.kind.value}"
            raise LayerError(last, got=got, wanted=wanted)

    @overload
    def link_octets(self, ip_octets: int, ip_header: int = IPV4) -> int: ...

    @overload
    def link_octets(self, ip_octets: Longs, ip_header: int | Longs = IPV4) -> Longs: ...

    def link_octets(self, ip_octets: int | Longs, ip_header: int | Longs = IPV4) -> int | Longs:
        """Returns the octets on the link of a voice packet, or of each of a column of them.

        Args:
            ip_octets: IP total length.
            ip_header: Octets of the IP header, which is part of it.
        """
        if isinstance(ip_octets, int):
            return self._outermost(ip_octets, cast("int", ip_header)).octets
        return self._outermost(ip_octets, ip_octets * 0 + ip_header).octets

    def steps(self, ip_octets: int, ip_header: int = IPV4) -> list[Step]:
        """Returns how the octets of one packet grow, a step a layer."""
        packet = _voice(ip_octets, ip_header)
        steps = []
        for layer in self.layers:
            account = layer.account(packet.kind)
            packet = layer.around(packet)
            steps.append(Step(layer.name, packet.octets, account))
        return steps

    def _outermost(self, ip_octets: Count, ip_header: Count) -> Packet[Count]:
        packet = _voice(ip_octets, ip_header)
        for layer in self.layers:
            packet = layer.around(packet)
        return packet

    def __str__(self) -> str:
        return ", ".join(_shown(layer) for layer in self.layers) or BARE


def make_framing(spec: Sequence[LayerSpec]) -> Framing:
    """Returns the framing of a plan.

    Args:
        spec: The layers from the IP packet outwards, each a name or one name with its options.
            An empty one, or "ip" alone, is the bare IP packet.

    Raises:
        LayerError: A layer or option that there is not, or layers that cannot be put so.
    """
    if len(spec) > MOST_LAYERS:
        raise LayerError(MOST_LAYERS, got=f"{len(spec)} layers", wanted=f"{MOST_LAYERS} at most")
    if list(spec) == [BARE]:
        return Framing()
    return Framing(tuple(_layer(index, entry) for index, entry in enumerate(spec)))


def parse_framing(text: str) -> Framing:
    """Returns the framing that a command line names.

    Args:
        text: The layers from the IP packet outwards with commas between, each with its options:
            "crtp,ppp", "esp:cipher=aes-gcm:natt=yes,ethernet", or "ip" for the bare IP packet.

    Raises:
        LayerError: As for `make_framing`.
    """
    entries = [entry.strip() for entry in text.split(",")] if text.strip() else []
    return make_framing([_spec(index, entry) for index, entry in enumerate(entries)])


def _voice(octets: Count, header: Count) -> Packet[Count]:
    return Packet(octets, octets, header, Kind.VOICE)


def _layer(index: int, entry: LayerSpec) -> Layer:
    name: object = entry
    options: Mapping[str, object] = {}
    if isinstance(entry, Mapping) and len(entry) == 1:
        ((name, options),) = entry.items()
    if not isinstance(name, str) or not isinstance(options, Mapping):
        wanted = "a layer's name, or one name with its options, such as {ppp: {flags: 2}}"
        raise LayerError(index, got=quoted(entry), wanted=wanted)
    try:
        return make_layer(name, options)
    except InputError as error:
        what = "" if error.what == "layer" else f"{error.what} "
        got = f"{what}{error.got}"
        raise LayerError(index, got=got, wanted=error.wanted, remedy=error.remedy) from None


def _spec(index: int, entry: str) -> LayerSpec:
    """Returns a layer of the command line as a plan would have it."""
    name, *given = entry.split(":")
    options: dict[str, object] = {}
    for option in given:
        key, sign, value = option.partition("=")
        if not sign:
            wanted = "option=value after the colon, such as ppp:flags=2"
            raise LayerError(index, got=quoted(entry), wanted=wanted)
        options[key.strip()] = _value(value.strip())
    return {name: options} if options else name


def _value(text: str) -> object:
    if text in ("yes", "true", "no", "false"):
        return text in ("yes", "true")
    return int(text) if text.isdecimal() and len(text) < 10 else text


def _misplaced(index: int, layer: Layer, below: Kind) -> LayerError:
    got = f"{layer.name} around {below.value}"
    if layer.name == "crtp":
        remedy = "crtp compresses the voice packet's own headers: list it first, and once."
        return LayerError(index, got=got, remedy=remedy)
    wanted = _carriers(below)
    remedy = "Layers are listed from the IP packet outwards."
    if below is Kind.COMPRESSED:
        remedy = "crtp works on one hop only: a router on the way needs the whole headers."
    elif below not in UNFINISHED:
        wanted = f"nothing more, or {wanted}" if wanted else "nothing more: it is finished"
    return LayerError(index, got=got, wanted=wanted, remedy=remedy)


def _carriers(kind: Kind) -> str:
    takers = [name for name, layer in LAYERS.items() if kind in layer.takes]
    return one_of(takers) if takers else ""


def _shown(layer: Layer) -> str:
    """Returns a layer's name, with the options that are not at their default."""
    given = [
        f"{option.name} {_word(value)}"
        for option in fields(cast("Any", layer))
        if (value := getattr(layer, option.name)) != option.default
    ]
    return f"{layer.name} ({' '.join(given)})" if given else layer.name


def _word(value: object) -> str:
    return {True: "yes", False: "no"}[value] if isinstance(value, bool) else str(value)
