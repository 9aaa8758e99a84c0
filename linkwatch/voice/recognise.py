"""The codec of a stream, and the evidence for it."""

from collections.abc import Mapping
from functools import lru_cache
from typing import NamedTuple

from linkwatch.errors import InputError
from linkwatch.plan.codecs import STATIC_PAYLOAD_TYPES, codecs, find_codec

UNKNOWN = "unknown"
TELEPHONE_EVENT, COMFORT_NOISE = "telephone-event", "CN"
NOT_SPEECH = (TELEPHONE_EVENT.upper(), COMFORT_NOISE)

# The clocks that RTP payload formats use for audio and, last, video (RFC 3551 6 and the formats
# registered since); a sender's clock is evidence, so the nearest one by ratio is taken.
CLOCKS_HZ = (8000, 16000, 32000, 48000, 90000)
VIDEO_CLOCK_HZ = 90000


class Meaning(NamedTuple):
    """What a payload type means.

    Attributes:
        name: An encoding name, such as "G729", or "unknown".
        clock_hz: Its RTP clock, 0 while it is not known.
        media: "audio", "video" or "unknown".
        evidence: "static", "plan" or "unknown".
        speech: False for comfort noise and telephone events, which carry no call by themselves.
    """

    name: str
    clock_hz: int
    media: str
    evidence: str
    speech: bool


NO_MEANING = Meaning(UNKNOWN, 0, UNKNOWN, UNKNOWN, speech=True)


class Recogniser:
    """Tells what payload types mean.

    Args:
        payload_types: What the plan says that dynamic payload types mean here, by number.
    """

    def __init__(self, payload_types: Mapping[int, str]) -> None:
        self._meanings = {
            number: Meaning(static.name, static.clock_hz, static.media, "static", speech=True)
            for number, static in STATIC_PAYLOAD_TYPES.items()
        }
        for number, name in payload_types.items():
            self._meanings[number] = _planned(name)
        for number, meaning in self._meanings.items():
            if meaning.name.upper() in NOT_SPEECH:
                self._meanings[number] = meaning._replace(speech=False)

    def meaning(self, payload_type: int) -> Meaning:
        """Returns what a payload type (0 to 127) means."""
        return self._meanings.get(payload_type, NO_MEANING)

    @lru_cache(maxsize=4096)  # noqa: B019 - asked for every stream at every tick
    def codec(
        self, payload_type: int, packet_ms: float | None, payload_octets: float, clock_hz: int
    ) -> tuple[str, str, str]:
        """Returns name, evidence and media of a stream's codec.

        Args:
            payload_type: The payload type of most of its packets.
            packet_ms: Its packetisation, where known.
            payload_octets: Mean payload octets of a packet.
            clock_hz: The sender's clock as it was found, where the payload type does not tell.
        """
        meaning = self.meaning(payload_type)
        if meaning.name == UNKNOWN:
            known = clock_hz == VIDEO_CLOCK_HZ
            return UNKNOWN, UNKNOWN, "video" if known else "audio" if clock_hz else UNKNOWN
        return _rate(meaning.name, packet_ms, payload_octets), meaning.evidence, meaning.media


def nearest_clock(ticks: int, nanoseconds: int) -> int:
    """Returns the clock in Hz that fits a timestamp step over a time best, or 0 where none can."""
    if ticks <= 0 or nanoseconds <= 0:
        return 0
    rate = ticks / nanoseconds * 1e9
    return min(CLOCKS_HZ, key=lambda clock: max(clock / rate, rate / clock))


def _planned(name: str) -> Meaning:
    """Returns the meaning of a name that the plan gives to a payload type."""
    if name.upper() in NOT_SPEECH:
        return Meaning(name, 8000, "audio", "plan", speech=False)
    try:
        codec = find_codec(name)
    except InputError:  # a codec whose cost nobody knows is still a codec with a name
        return Meaning(name, 0, "audio", "plan", speech=True)
    return Meaning(codec.family, codec.clock_hz, "audio", "plan", speech=True)


def _rate(name: str, packet_ms: float | None, payload_octets: float) -> str:
    """Returns the one of a family's codecs (rates, modes) that the payload's size tells."""
    rates = [codec for codec in codecs().values() if codec.family == name]
    if len(rates) < 2 or not packet_ms:
        return name

    def misfit(octets: float, frame_ms: float) -> float:
        return abs(payload_octets / packet_ms - octets / frame_ms)

    return min(rates, key=lambda codec: misfit(codec.frame_octets, codec.frame_ms)).name
