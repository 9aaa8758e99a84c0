"""The budget as a row of places: what is taken, what is free, what is kept, what is too much.

A place is the share of the budget that one planned call has. A call that costs three times as much
takes three places.
"""

from dataclasses import dataclass
from math import ceil, isfinite

from linkwatch.board.lines import Line, Piece, line
from linkwatch.watch.snapshot import DirectionState, LinkState

TAKEN, FREE, KEPT, BROACHED, OVER, MORE, EDGE = "■", "□", "○", "●", "►", "+", "┃"
USED, USED_HALF, USED_OVER = "━", "╸", "═"
OVER_SEEN = 3
ROW = ((TAKEN, "accent"), (FREE, "good"), (BROACHED, "warn"), (KEPT, "second"))
MOST_PLACES = 1_000_000


@dataclass(frozen=True, slots=True)
class Places:
    """One direction's budget in places.

    Attributes:
        total: Places of the budget, those of the reserve among them.
        reserve: Places that are kept free.
        taken: Places that are reserved by calls; more than `total` where it is over the budget.
        used: Places that the packets really seen fill.
    """

    total: int
    reserve: int
    taken: int
    used: float

    @property
    def over(self) -> int:
        """Places beyond the budget."""
        return max(0, self.taken - self.total)


def places_of(link: LinkState, way: DirectionState) -> Places | None:
    """Returns a direction's budget in places, or None where it has none: no limit, or no call fits.

    While there is room, exactly as many places are free as the ledger says that calls fit. The
    others are shared out by the limit that is the more exhausted, calls or kbit/s.
    """
    total = _total(link, way)
    if total is None:
        return None
    reserve = max(0, min(link.reserve_calls, total))
    if way.room_calls is not None and way.room_calls > 0:
        taken = max(0, total - reserve - way.room_calls)
    else:
        by_calls = way.calls / link.planned_calls * total if link.planned_calls else way.calls
        by_rate = _share(way.reserved_kbps, link, way) * total
        least = total - reserve if way.room_calls is not None else 0
        taken = max(least, ceil(round(max(by_calls, by_rate), 6)))
    used = _share(way.used_kbps, link, way) * total
    return Places(total, reserve, min(taken, MOST_PLACES), min(used, MOST_PLACES))


def _total(link: LinkState, way: DirectionState) -> int | None:
    if link.planned_calls is not None:
        total: float = link.planned_calls
    elif way.budget_kbps and link.call_kbps > 0:
        total = way.budget_kbps / link.call_kbps
    else:
        return None
    return min(int(total), MOST_PLACES) if total >= 1 else None


def _share(rate_kbps: float, link: LinkState, way: DirectionState) -> float:
    """Returns which part of the whole budget a rate is."""
    whole = way.budget_kbps or link.call_kbps * (link.planned_calls or 0)
    share = rate_kbps / whole if whole > 0 else 0.0
    return share if isfinite(share) else 0.0


@dataclass(frozen=True, slots=True)
class Scale:
    """How places become cells.

    Attributes:
        cells: Cells per place.
        each: Places that share them.
    """

    cells: int
    each: int


def scale_for(places: Places, width: int) -> Scale:
    """Returns the widest scale at which the places stand in `width` cells.

    Of what hangs over only the beginning needs space: how much it is, the verdict says.
    """
    need = places.total + (1 + min(places.over, OVER_SEEN) if places.over else 0)
    for cells in (2, 1):
        if need * cells <= width:
            return Scale(cells, 1)
    return Scale(1, ceil(places.total / max(width - OVER_SEEN - 4, 1)))


def places_line(places: Places, scale: Scale, width: int) -> Line:
    """Returns the row of places."""
    free = max(0, places.total - places.reserve - places.taken)
    broached = max(0, min(places.taken, places.total) - (places.total - places.reserve))
    cells = ceil(places.total / scale.each)
    counts = {
        FREE: free,
        KEPT: places.reserve - broached,
        BROACHED: broached,
        TAKEN: min(places.taken, places.total - places.reserve),
    }
    # Where places share a cell, a free one is never hidden by others, nor a kept one by taken ones.
    left = cells
    for glyph, count in counts.items():
        counts[glyph] = min(left, ceil(count / scale.each))
        left -= counts[glyph]
    runs = [Piece((glyph + " " * (scale.cells - 1)) * counts[glyph], tone) for glyph, tone in ROW]
    if places.over:
        runs += _overhang(places.over, scale, width - cells * scale.cells - 1)
    return line(*(run for run in runs if run.text))


def _overhang(over: int, scale: Scale, width: int) -> list[Piece]:
    """Returns the edge of the budget and what hangs over it, as far as there is space."""
    most = max(1, width // scale.cells)
    shown = ceil(over / scale.each)
    glyphs = OVER * shown if shown <= most else OVER * (most - 1) + MORE
    return [Piece(EDGE, "strong"), Piece((" " * (scale.cells - 1)).join(glyphs), "alarm")]


def used_line(places: Places, scale: Scale, width: int) -> Line:
    """Returns the bar of what is really used, to the scale of the row of places above it."""
    per_place = scale.cells / scale.each
    halves = min(round(places.used * per_place * 2), 2 * width)
    inside = min(halves, int(2 * places.total * per_place))
    bar = USED * (inside // 2) + USED_HALF * (inside % 2)
    beyond = USED_OVER * ((halves - inside + 1) // 2)
    return line(Piece(bar, "accent"), Piece(beyond[: max(0, width - len(bar))], "alarm"))
