"""Which links a call crosses, and which way its streams go there."""

from ipaddress import IPv4Address, IPv6Address, ip_address

from linkwatch.plan.model import Direction, LinkPlan, Plan
from linkwatch.voice.calls import Call
from linkwatch.voice.names import address_text

TO_SITE: Direction = "to_site"
FROM_SITE: Direction = "from_site"
OTHER_WAY: dict[Direction, Direction] = {TO_SITE: FROM_SITE, FROM_SITE: TO_SITE}

MOST_KNOWN = 65_536  # calls whose ways are remembered


class Crossings:
    """Where calls go, by the site prefixes of a plan's links."""

    def __init__(self, plan: Plan) -> None:
        self._links = plan.links
        self._known: dict[int, tuple[Direction | None, ...]] = {}

    def first_link(self, source: str, destination: str) -> int:
        """Returns the index of the first link between two addresses; 0 where there is none."""
        ends = ip_address(source), ip_address(destination)
        crossed = (i for i, link in enumerate(self._links) if _direction(link, *ends))
        return next(crossed, 0)

    def of(self, call: Call) -> tuple[Direction | None, ...]:
        """Returns for each link which way the call's forward streams cross it, or None."""
        ways = self._known.get(call.id)
        if ways is None:
            if len(self._known) >= MOST_KNOWN:
                self._known.clear()
            one, other = (ip_address(address_text(address)) for address, _ in call.ends)
            ways = tuple(_direction(link, one, other) for link in self._links)
            self._known[call.id] = ways
        return ways


def _direction(
    link: LinkPlan, source: IPv4Address | IPv6Address, destination: IPv4Address | IPv6Address
) -> Direction | None:
    """Returns which way a stream crosses a link.

    Without site prefixes every stream counts; then the end with the lower address is taken for
    the site, which is a guess, and a snapshot says so.
    """
    if not link.site_prefixes:
        lower_first = (source.version, int(source)) <= (destination.version, int(destination))
        return FROM_SITE if lower_first else TO_SITE
    return link.crossing(source, destination)
