"""The story of the built-in scene: an invented cutover, minute by minute.

Kiln Lane depot moves its telephones to an IP link. Every row is a flow of packets; `scene` makes
frames of them. All names are invented, all addresses private or from the documentation ranges.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from random import Random

LENGTH_S = 360
EF, UNMARKED = 46, 0
G729, PCMA, PCMU = 18, 8, 0
EVENT = 101
PAYLOAD_OCTETS = {G729: 20, PCMA: 160, PCMU: 160, EVENT: 4}  # 20 ms each (RFC 3551, RFC 4733)
PACKET_MS, TICKS = 20, 160
# RFC 4733 2.3 and 2.5.1.4: the key 5 at -10 dBm0; the end is told three times.
DIGIT, VOLUME, ENDINGS = 5, 10, 3

SITE, CENTRAL = "10.20.1.{}", "10.9.0.{}"
SITE_IPV6, CENTRAL_IPV6 = "2001:db8:20::{}", "2001:db8:9::{}"
DATA_KBPS, FULL_KBPS = 180.0, 435.0  # other traffic, usually and while a backup runs
FULL_FROM_S, FULL_TO_S = 243, 261


@dataclass(frozen=True, slots=True)
class Flow:
    """One direction of packets.

    Attributes:
        source, destination: Address and port.
        start_s, end_s: When it runs, in the scene's seconds.
        payload_type: RTP's, or -1 for what is no RTP.
        ssrc, first_sequence, first_timestamp: RTP's.
        dscp: Its marking.
        vlan: Whether its frames carry a tag.
        pause_s: A stretch (from, to) in which it sends nothing.
        only_s: A stretch in which alone it sends, with one timestamp, as telephone events do.
        noise_ms, noise_octets: For what is no RTP: time between packets, octets of each.
        changing: Which of these octets (from, to) change from packet to packet.
    """

    source: tuple[str, int]
    destination: tuple[str, int]
    start_s: float
    end_s: float
    payload_type: int
    ssrc: int = 0
    first_sequence: int = 0
    first_timestamp: int = 0
    dscp: int = EF
    vlan: bool = True
    pause_s: tuple[float, float] | None = None
    only_s: tuple[float, float] | None = None
    noise_ms: float = 0.0
    noise_octets: bytes = b""
    changing: tuple[int, int] = (0, 0)


@dataclass(frozen=True, slots=True)
class Call:
    """A call of the story.

    Attributes:
        name: What happens in it.
        start_s, end_s: When it is up.
        payload_type: The codec of both directions.
        phone: The number of the phone at the site.
        dscp: The marking that the phone gives; the far end marks EF.
        answered: Whether the far end's audio arrives.
        ipv6: Whether it runs over IPv6.
        within: Whether both ends are at the site.
        digits_s: When digits are pressed, or None.
    """

    name: str
    start_s: float
    end_s: float
    payload_type: int = G729
    phone: int = 0
    dscp: int = EF
    answered: bool = True
    ipv6: bool = False
    within: bool = False
    digits_s: float | None = None

    @property
    def crosses(self) -> bool:
        """Whether it crosses the link."""
        return not self.within


TOLD = (
    Call("the first test call, good both ways", 4, 70, phone=11, digits_s=15),
    Call("from desk to desk: crosses no link", 25, 110, PCMU, phone=12, within=True),
    Call("answers with a codec nobody planned", 62, 150, PCMA, phone=13),
    Call("comes from a phone that does not mark", 88, 180, phone=14, dscp=UNMARKED),
    Call("audio goes out and none comes back", 118, 168, phone=15, answered=False),
    Call("over IPv6", 132, 235, phone=16, ipv6=True),
    Call("the last one, calm", 300, 352, phone=17),
)
# The ordinary ones: how many begin, between which seconds.
ORDINARY = ((3, 18, 50), (4, 70, 130), (3, 150, 190), (9, 204, 226))
LOSS_FROM_S, LOSS_TO_S, LOSS_SHARE = 176, 196, 0.05  # towards the site, a bad stretch of line
BUSY_END_S = (262, 292)


def calls(seed: int) -> tuple[Call, ...]:
    """Returns the calls of the scene; the ordinary ones come and go as the seed has it."""
    chance = Random(seed)  # noqa: S311 - a story needs no secrets
    ordinary: list[Call] = []
    for number, begin, end in ORDINARY:
        for _ in range(number):
            start = chance.uniform(begin, end)
            stop = start + chance.uniform(60, 140)
            if begin == ORDINARY[-1][1]:
                stop = chance.uniform(*BUSY_END_S)
            phone = 30 + len(ordinary)
            ordinary.append(Call("ordinary", start, min(stop, 320), phone=phone))
    return tuple(sorted((*TOLD, *ordinary), key=lambda call: call.start_s))


def flows(seed: int) -> tuple[Flow, ...]:
    """Returns all flows of the scene: the calls', and what only looks like calls."""
    chance = Random(seed + 1)  # noqa: S311
    return (*(flow for call in calls(seed) for flow in _of_call(call, chance)), *_noise())


def _of_call(call: Call, chance: Random) -> Iterator[Flow]:
    site, central = (SITE_IPV6, CENTRAL_IPV6) if call.ipv6 else (SITE, CENTRAL)
    phone = (site.format(call.phone), 16384 + 2 * call.phone)
    far = (site if call.within else central).format(call.phone + 100)
    there = Flow(
        phone,
        (far, 20000 + 2 * call.phone),
        call.start_s,
        call.end_s,
        call.payload_type,
        chance.getrandbits(32),
        chance.getrandbits(16),
        chance.getrandbits(32),
        call.dscp,
    )
    if call.digits_s is None:
        yield there
    else:
        pressed = (call.digits_s, call.digits_s + 0.4)
        yield replace(there, pause_s=pressed)
        yield replace(there, only_s=pressed, payload_type=EVENT)
    if call.answered:
        yield Flow(
            there.destination,
            phone,
            call.start_s + 0.013,
            call.end_s,
            call.payload_type,
            chance.getrandbits(32),
            chance.getrandbits(16),
            chance.getrandbits(32),
            EF,
        )


def _noise() -> Iterator[Flow]:
    """What passes a real link besides, and must not be taken for calls."""
    question = b"\x05depot\x07example\x00" + b"\x00\x01\x00\x01"  # its address (RFC 1035 4.1.2)
    names = b"\x81\x3c\x01\x00\x00\x01" + bytes(6) + question  # what changes is the number
    clocks = b"\x9b\x03\x06\xec" + bytes(44)  # what changes is the time sent (RFC 5905 7.3)
    for phone, port, far, far_port, every_ms, octets, changing in (
        (2, 53011, 53, 53, 900, names, (1, 2)),
        (3, 123, 9, 123, 4000, clocks, (40, 48)),
        (4, 27311, 77, 27015, 50, b"\x80\x10" + bytes(58), (2, 12)),  # a game, by the look of it
        (5, 40001, 78, 40002, 30, b"\x80" + bytes(120), (1, 121)),  # nothing but chance
    ):
        yield Flow(
            (SITE.format(phone), port),
            (CENTRAL.format(far), far_port),
            0,
            LENGTH_S,
            -1,
            dscp=UNMARKED,
            noise_ms=every_ms,
            noise_octets=octets,
            changing=changing,
        )
