"""The ledger: per link and direction, what calls reserve, what they use, what room is left."""

from collections.abc import Iterable
from dataclasses import dataclass
from functools import lru_cache

from linkwatch.errors import InputError
from linkwatch.plan.codecs import find_codec
from linkwatch.plan.cost import call_cost
from linkwatch.plan.model import Direction, LinkPlan, Plan
from linkwatch.voice.calls import Call
from linkwatch.voice.figures import StreamState
from linkwatch.watch.crossing import FROM_SITE, OTHER_WAY, TO_SITE, Crossings
from linkwatch.watch.snapshot import DirectionState, LinkState

IPV4_HEADER, IPV6_HEADER = 20, 40
IPV4_MAPPED = 0xFFFF


@dataclass(frozen=True, slots=True)
class Load:
    """All traffic on the tap's interface over an interval, by its counters.

    Attributes:
        received_kbps, sent_kbps: The two directions.
    """

    received_kbps: float
    sent_kbps: float

    @property
    def busier_kbps(self) -> float:
        """The busier direction."""
        return max(self.received_kbps, self.sent_kbps)


@dataclass(slots=True)
class _Sum:
    calls: int = 0
    reserved_kbps: float = 0.0
    link_octets: float = 0.0
    frame_octets: int = 0


class Ledger:
    """The sums of every link of a plan."""

    def __init__(self, plan: Plan, crossings: Crossings) -> None:
        self._plan = plan
        self._crossings = crossings

    def enter(
        self, calls: Iterable[Call], interval_s: float, load: Load | None
    ) -> tuple[LinkState, ...]:
        """Returns the state of each link, from the calls and what they carried in the interval.

        Args:
            calls: The live calls.
            interval_s: The seconds in which they carried what they carried.
            load: The interface counters over the same time, where there are any.
        """
        sums = [{TO_SITE: _Sum(), FROM_SITE: _Sum()} for _ in self._plan.links]
        for call in calls:
            for index, forward in enumerate(self._crossings.of(call)):
                if forward:
                    self._enter(call, index, forward, sums[index])
        # With several links behind one port its counters cannot be divided among them.
        known = load if len(self._plan.links) == 1 else None
        return tuple(
            _link_state(link, both, interval_s, known)
            for link, both in zip(self._plan.links, sums, strict=True)
        )

    def _enter(
        self, call: Call, index: int, forward: Direction, both: dict[Direction, _Sum]
    ) -> None:
        for serial, carried in call.carried.items():
            way = forward if serial in call.forward else OTHER_WAY[forward]
            both[way].link_octets += carried.link_octets[index]
            both[way].frame_octets += carried.frame_octets
        if call.up:
            for way in (TO_SITE, FROM_SITE):
                both[way].calls += 1
                both[way].reserved_kbps += self.reserved_kbps(call, index, way == forward)

    def reserved_kbps(self, call: Call, link: int, forward: bool) -> float:
        """Returns what admission counts for one direction of a call on a link.

        That is the planned cost of the codec and packetisation it uses. A direction that is not
        heard is counted like the other one: it may speak at any time.
        """
        there, back = call.speaking
        stream = (there or back) if forward else (back or there)
        if stream is None:
            return 0.0
        ipv6 = call.ends[0][0] >> 32 != IPV4_MAPPED
        tag = self._plan.links[link].call.srtp_tag_octets
        if stream.codec != "unknown" and stream.packet_ms:
            planned = self._planned_kbps(link, stream.codec, stream.packet_ms, ipv6, tag)
            if planned is not None:
                return planned
        return self._measured_kbps(link, stream, ipv6)

    @lru_cache(maxsize=4096)  # noqa: B019 - one plan lives as long as its monitor
    def _planned_kbps(
        self, link: int, codec: str, packet_ms: float, ipv6: bool, tag: int
    ) -> float | None:
        framing = self._plan.links[link].framing
        try:
            cost = call_cost(
                find_codec(codec, packet_ms), packet_ms, framing, ipv6=ipv6, srtp_tag_octets=tag
            )
        except InputError:  # a codec whose cost is not in the table, or half a frame
            return None
        return cost.kbps

    def _measured_kbps(self, link: int, stream: StreamState, ipv6: bool) -> float:
        """Returns what a stream's mean packet costs at the rate at which it sends."""
        header = IPV6_HEADER if ipv6 else IPV4_HEADER
        mean_octets = round(stream.ip_octets / max(stream.packets, 1))
        octets = self._plan.links[link].framing.link_octets(mean_octets, header)
        seconds = (stream.last - stream.first) / 1e9
        if stream.packet_ms:
            packets_per_second = 1000 / stream.packet_ms
        else:
            packets_per_second = (stream.packets - 1) / seconds if seconds else 0.0
        return float(octets * 8 * packets_per_second / 1000)


def _link_state(
    link: LinkPlan, both: dict[Direction, _Sum], interval_s: float, load: Load | None
) -> LinkState:
    budget = link.budget_for(TO_SITE)
    to_site = _direction_state(link, TO_SITE, both[TO_SITE], interval_s)
    from_site = _direction_state(link, FROM_SITE, both[FROM_SITE], interval_s)
    limits = [d.capacity_kbps for d in (to_site, from_site) if d.capacity_kbps is not None]
    beside = None
    if load and limits and budget.call_kbps:
        beside = max(0, int((min(limits) - load.busier_kbps) // budget.call_kbps))
    return LinkState(
        name=link.name,
        framing=str(link.framing),
        planned_call=f"{link.call.codec.name} {link.call.packet_ms:g} ms",
        call_kbps=budget.call_kbps,
        planned_calls=budget.calls,
        reserve_calls=budget.reserve_calls,
        fit_beside_load=beside,
        directions_known=bool(link.site_prefixes),
        link_kbps=load.busier_kbps if load else None,
        to_site=to_site,
        from_site=from_site,
    )


def _direction_state(
    link: LinkPlan, way: Direction, total: _Sum, interval_s: float
) -> DirectionState:
    budget = link.budget_for(way)
    capacity = getattr(link.capacity, way) if link.capacity else None
    return DirectionState(
        calls=total.calls,
        reserved_kbps=total.reserved_kbps,
        used_kbps=total.link_octets * 8 / 1000 / interval_s,
        seen_kbps=total.frame_octets * 8 / 1000 / interval_s,
        budget_kbps=budget.kbps,
        capacity_kbps=capacity,
        reserve_kbps=budget.reserve_kbps,
        room_calls=budget.room(total.calls, total.reserved_kbps),
    )
