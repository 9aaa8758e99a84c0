"""What the trend remembers: voice against the budget, a second at a time, for an hour."""

from collections import deque
from dataclasses import dataclass

from linkwatch.watch.snapshot import DirectionState, LinkState

LONGEST_MINUTES = 60
SECOND = 1_000_000_000


@dataclass(frozen=True, slots=True)
class Moment:
    """The highest rates of one second.

    Attributes:
        second: Seconds since 1970 UTC.
        used_kbps: What voice used.
        reserved_kbps: What was reserved.
    """

    second: int
    used_kbps: float
    reserved_kbps: float


def drawn_ways(link: LinkState) -> tuple[str, tuple[DirectionState, ...]]:
    """Returns which directions of a link are remembered as one, and what to call them.

    Of two directions with the same budget that is the busier one at any moment. Where the budgets
    differ, one line could not be held against both: then it is the direction with less of it.
    """
    to_site, from_site = link.to_site, link.from_site
    if to_site.budget_kbps == from_site.budget_kbps:
        return "busier direction", (to_site, from_site)
    if from_site.budget_kbps is None or to_site.budget_kbps is None:
        to_limited = to_site.budget_kbps is not None
    else:
        to_limited = to_site.budget_kbps < from_site.budget_kbps
    return ("to site", (to_site,)) if to_limited else ("from site", (from_site,))


class History:
    """The last hour of one link. Time that goes back begins a new one."""

    def __init__(self) -> None:
        self._moments: deque[Moment] = deque(maxlen=LONGEST_MINUTES * 60 + 1)

    def take(self, time: int, link: LinkState) -> None:
        """Keeps what a link shows at a time (nanoseconds since 1970 UTC)."""
        second = time // SECOND
        _, ways = drawn_ways(link)
        used = max(way.used_kbps for way in ways)
        reserved = max(way.reserved_kbps for way in ways)
        if self._moments and second < self._moments[-1].second:
            self._moments.clear()
        if self._moments and second == self._moments[-1].second:
            last = self._moments.pop()
            used, reserved = max(used, last.used_kbps), max(reserved, last.reserved_kbps)
        self._moments.append(Moment(second, used, reserved))

    def columns(self, minutes: int, width: int) -> tuple[int, list[tuple[float, float] | None]]:
        """Returns the last minutes as at most `width` columns, each with its highest rates.

        Columns begin at whole multiples of their length, so that what has been drawn stays as it
        is until the next column begins.

        Returns:
            Seconds per column; and per column, oldest first, used and reserved kbit/s, or None
            where nothing was seen.
        """
        each = max(1, -(-minutes * 60 // max(width, 1)))
        shown = max(1, -(-minutes * 60 // each))
        columns: list[tuple[float, float] | None] = [None] * shown
        if not self._moments:
            return each, columns
        latest = self._moments[-1].second // each
        for moment in reversed(self._moments):
            place = shown - 1 - (latest - moment.second // each)
            if place < 0:
                break
            used, reserved = columns[place] or (0.0, 0.0)
            columns[place] = max(used, moment.used_kbps), max(reserved, moment.reserved_kbps)
        return each, columns
