"""The codecs: what a packet of speech holds, by name and packetisation."""

import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from importlib.resources import files
from types import MappingProxyType
from typing import NamedTuple

from linkwatch.errors import InputError
from linkwatch.plan.wording import nearest, quoted

DEFAULT_MS = 20.0  # or one frame, whichever is longer (RFC 3551 4.2)
LONGEST_MS = 200.0  # what a receiver has to take, to the next whole frame (RFC 3551 4.2)
DUST_MS = 1e-6  # a packetisation given as a float need not be exact to the last bit


@dataclass(frozen=True, slots=True)
class Codec:
    """A codec at one rate.

    Attributes:
        name: Its name, such as "G723-6.3".
        family: The encoding name that RTP and SDP know it by, such as "G723".
        clock_hz: Its RTP clock.
        frame_ms: Its frame, milliseconds; 1 for codecs that code single samples.
        frame_octets: What a frame takes.
        sid_octets: What a frame that describes silence takes, or None where it has none.
        payload_type: Its static payload type, or None where it is dynamic.
        aliases: Other names for the same coding.
        source: Where the figures are published.
    """

    name: str
    family: str
    clock_hz: int
    frame_ms: float
    frame_octets: int
    sid_octets: int | None
    payload_type: int | None
    aliases: tuple[str, ...]
    source: str

    @property
    def default_packet_ms(self) -> float:
        """The packetisation where none is given, milliseconds (RFC 3551 4.2)."""
        return max(DEFAULT_MS, self.frame_ms)

    def frames(self, packet_ms: float) -> int:
        """Returns how many frames a packet holds.

        Args:
            packet_ms: The packetisation, milliseconds: a whole multiple of the frame, up to the
                first one that is not below 200 ms.

        Raises:
            InputError: The packetisation is no such multiple.
        """
        most = math.ceil(LONGEST_MS / self.frame_ms)
        frames = round(packet_ms / self.frame_ms) if math.isfinite(packet_ms) else 0
        if not 1 <= frames <= most or abs(frames * self.frame_ms - packet_ms) > DUST_MS:
            raise InputError(
                f"packetisation of {self.name}",
                got=f"{packet_ms:g} ms",
                wanted=f"a whole multiple of its {self.frame_ms:g} ms frame, up to "
                f"{most * self.frame_ms:g} ms",
            )
        return frames

    def payload_octets(self, packet_ms: float) -> int:
        """Returns the octets of speech in a packet.

        Args:
            packet_ms: The packetisation, milliseconds, as for `frames`.

        Raises:
            InputError: The packetisation is no whole multiple of the frame, or too long.
        """
        return self.frames(packet_ms) * self.frame_octets


class StaticPayloadType(NamedTuple):
    """What RFC 3551 says that a payload type means.

    Attributes:
        name: The encoding name.
        clock_hz: The RTP clock.
        media: "audio" or "video".
    """

    name: str
    clock_hz: int
    media: str


_AUDIO = {
    0: ("PCMU", 8000),
    3: ("GSM", 8000),
    4: ("G723", 8000),
    5: ("DVI4", 8000),
    6: ("DVI4", 16000),
    7: ("LPC", 8000),
    8: ("PCMA", 8000),
    9: ("G722", 8000),
    10: ("L16", 44100),
    11: ("L16", 44100),
    12: ("QCELP", 8000),
    13: ("CN", 8000),
    14: ("MPA", 90000),
    15: ("G728", 8000),
    16: ("DVI4", 11025),
    17: ("DVI4", 22050),
    18: ("G729", 8000),
}
_VIDEO = {25: "CelB", 26: "JPEG", 28: "nv", 31: "H261", 32: "MPV", 33: "MP2T", 34: "H263"}

# RFC 3551 tables 4 and 5; MP2T, which may hold both, stands with the video it mostly carries.
STATIC_PAYLOAD_TYPES: Mapping[int, StaticPayloadType] = MappingProxyType(
    {number: StaticPayloadType(name, clock, "audio") for number, (name, clock) in _AUDIO.items()}
    | {number: StaticPayloadType(name, 90000, "video") for number, name in _VIDEO.items()}
)


@cache
def codecs() -> Mapping[str, Codec]:
    """Returns the codecs whose cost is known, by name."""
    import yaml

    text = files("linkwatch.plan").joinpath("codecs.yaml").read_text(encoding="utf-8")
    return MappingProxyType(
        {
            name: Codec(
                name=name,
                family=entry.get("family", name),
                clock_hz=entry["clock_hz"],
                frame_ms=float(entry["frame_ms"]),
                frame_octets=entry["frame_octets"],
                sid_octets=entry.get("sid_octets"),
                payload_type=entry.get("payload_type"),
                aliases=tuple(entry.get("aliases", ())),
                source=entry["source"],
            )
            for name, entry in yaml.safe_load(text).items()
        }
    )


def find_codec(name: str, packet_ms: float | None = None) -> Codec:
    """Returns the codec of that name; case and dots do not count.

    The name of a family means one of its codecs: "G723" the dearer rate, 6.3 kbit/s; "ILBC" the
    mode that the packetisation tells, and without one the 30 ms mode (the default of its SDP
    parameter, from memory).

    Args:
        name: A codec, one of its aliases, or a family.
        packet_ms: The packetisation, milliseconds, where it is known.

    Raises:
        InputError: No codec of that name is known.
    """
    key = _key(name)
    if key == "ILBC":
        return codecs()[f"ILBC-{_ilbc_mode(packet_ms)}"]
    codec = _by_key().get(key)
    if codec is None:
        raise InputError(
            "codec",
            got=quoted(name),
            wanted=f"one of {', '.join(codecs())}",
            remedy=nearest(name.upper(), codecs()),
        )
    return codec


def _ilbc_mode(packet_ms: float | None) -> int:
    if packet_ms is None:
        return 30
    whole_ms = round(packet_ms, 3)
    return 30 if whole_ms % 30 == 0 and whole_ms % 20 else 20


def _key(name: str) -> str:
    return name.strip().upper().replace(".", "").replace("_", "-")


@cache
def _by_key() -> Mapping[str, Codec]:
    found = {}
    for codec in codecs().values():
        for name in (codec.name, *codec.aliases):
            found[_key(name)] = codec
    dearer = codecs()["G723-6.3"]
    return found | {_key(name): dearer for name in ("G723", "G723.1")}
