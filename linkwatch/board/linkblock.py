"""A link as a block of lines: its word, and each direction's budget as a row of places."""

from collections.abc import Callable
from dataclasses import dataclass

from linkwatch.board.bigword import full_size, half_size
from linkwatch.board.lines import BLANK, Line, Piece, beside, fitted, line, plain, width
from linkwatch.board.places import TAKEN, places_line, places_of, scale_for, used_line
from linkwatch.board.text import NOTHING, kbps, padded, safe
from linkwatch.board.verdict import Verdict, verdict_on, verdict_on_direction
from linkwatch.watch.snapshot import DirectionState, LinkState, Snapshot

NAME_CELLS = 24
LABEL_CELLS = 11
VERDICT_CELLS = 8
SHORT_LABEL_CELLS, SHORT_CALLS_CELLS = 10, 6
WORD_CELLS = 30  # half-size words of up to two digits, with air on both sides
WIDE_WORD_CELLS = 60
LOAD, LOAD_FREE = "▬", "·"


@dataclass(frozen=True, slots=True)
class Space:
    """How much space a block has.

    Attributes:
        width: Cells.
        compact: Whether there are too few rows for a large word: three rows per link.
        airy: Whether there are rows to spare: large word of full size, blank lines.
    """

    width: int
    compact: bool = False
    airy: bool = False


def link_block(snapshot: Snapshot, link: LinkState, space: Space) -> list[Line]:
    """Returns a link's block of lines."""
    hearing = snapshot.tap.hearing
    verdict = verdict_on(link, hearing=hearing)
    if space.compact:
        return [_head(link, verdict, space), *_ways(link, space.width - 1, space, hearing=hearing)]
    large = space.airy and space.width >= 2 * WIDE_WORD_CELLS
    cells = WIDE_WORD_CELLS if large else WORD_CELLS
    left = _large(verdict, full_size if large else half_size, cells)
    left.append(BLANK)
    left.append(line(" ", Piece(verdict.meaning, verdict.tone)))
    left.append(line(" ", Piece(verdict.aside, "faint")))
    if not link.directions_known:
        left.append(line(" ", Piece("directions guessed", "warn")))
    if not large:
        left.remove(BLANK)
    right = _ways(link, space.width - cells - 1, space, hearing=hearing)
    return [_head(link, None, space), *beside(left, cells, right)]


def _large(verdict: Verdict, size: Callable[[str], list[str]], cells: int) -> list[Line]:
    """Returns the word in large letters. A number that finds no space is left to the sentence."""
    rows = size(verdict.word)
    if rows and len(rows[0]) > cells - 2:
        rows = size(verdict.word.split()[0])
    return [line(" ", Piece(row, verdict.tone)) for row in rows]


def _head(link: LinkState, verdict: Verdict | None, space: Space) -> Line:
    """Returns the line that says what the link is."""
    pieces: list[Piece | str] = [" ", Piece(safe(link.name, NAME_CELLS), "strong")]
    if verdict:
        pieces += ["  ", Piece(verdict.word or NOTHING, verdict.tone)]
    cost = f"  {safe(link.planned_call, 24)} costs {link.call_kbps:.1f} kbit/s each way"
    pieces.append(Piece(cost, "faint"))
    shown = line(*pieces)
    for more in (Piece(f" over {safe(link.framing, 40)}", "faint"), *_guess(link)):
        if width(shown) + width((more,)) <= space.width:
            shown += (more,)
    return shown


def _guess(link: LinkState) -> Line:
    """Returns the warning that directions are guessed, where they are."""
    if link.directions_known:
        return BLANK
    return line(Piece("  no site_prefixes in the plan: directions guessed", "warn"))


def _ways(link: LinkState, cells: int, space: Space, *, hearing: bool) -> list[Line]:
    """Returns the lines of both directions, or of the load where only counters are known."""
    if not hearing:
        return _load(link, cells)
    shown: list[Line] = []
    mark = "" if link.directions_known else "?"
    for label, way in ((f"to site{mark}", link.to_site), (f"from site{mark}", link.from_site)):
        if space.compact:
            shown.append(_short_way(label, link, way, cells))
        else:
            shown += _way(label, link, way, cells)
            if space.airy:
                shown.append(BLANK)
    return shown


def _way(label: str, link: LinkState, way: DirectionState, cells: int) -> list[Line]:
    """Returns one direction in three lines: its places, what is used of them, its figures."""
    name, calls = Piece(padded(label, LABEL_CELLS), "strong"), _calls(link, way)
    places = places_of(link, way)
    if places is None:
        return [
            line(name, Piece(_without_places(way), "faint")),
            line(padded(f"{calls} up", LABEL_CELLS)),
            _rates(way),
        ]
    strip = cells - LABEL_CELLS - VERDICT_CELLS - 1
    scale = scale_for(places, strip)
    verdict = verdict_on_direction(link, way)
    row = fitted(places_line(places, scale, strip), strip)
    word = Piece(padded(verdict.word.lower(), VERDICT_CELLS, right=True), verdict.tone)
    each = Piece(f" {TAKEN}={scale.each} calls" if scale.each > 1 else "", "faint")
    bar = fitted(used_line(places, scale, strip), strip)
    return [
        line(name, *row, word),
        line(padded(f"{calls} up", LABEL_CELLS), *bar, each),
        _rates(way),
    ]


def _short_way(label: str, link: LinkState, way: DirectionState, cells: int) -> Line:
    """Returns one direction in one line."""
    rates = f"{kbps(way.reserved_kbps)} of {kbps(way.budget_kbps).strip()}"
    name = Piece(" " + padded(label, SHORT_LABEL_CELLS), "strong")
    strip = cells - SHORT_LABEL_CELLS - SHORT_CALLS_CELLS - len(rates)
    calls = padded(_calls(link, way), SHORT_CALLS_CELLS)
    places = places_of(link, way)
    if places is None:
        return line(name, calls, f"{_without_places(way)}, {kbps(way.reserved_kbps)} kbit/s")
    row = fitted(places_line(places, scale_for(places, strip), strip), strip)
    return line(name, calls, *row, Piece(rates, "faint"))


def _without_places(way: DirectionState) -> str:
    """Returns why a direction has no places."""
    if way.room_calls is None:
        return "no limit in the plan"
    return "the budget holds no planned call"


def _calls(link: LinkState, way: DirectionState) -> str:
    planned = f"/{link.planned_calls}" if link.planned_calls is not None else ""
    return f"{way.calls}{planned}"


def _rates(way: DirectionState) -> Line:
    limit = f" of {kbps(way.budget_kbps)}" if way.budget_kbps is not None else ""
    return line(
        Piece("reserved ", "faint"),
        kbps(way.reserved_kbps),
        Piece("  used ", "faint"),
        kbps(way.used_kbps),
        Piece(f"{limit} kbit/s", "faint"),
    )


def _load(link: LinkState, cells: int) -> list[Line]:
    """Returns what the interface counters say: all traffic against the capacity."""
    ways = (link.to_site.capacity_kbps, link.from_site.capacity_kbps)
    capacity = min((limit for limit in ways if limit is not None), default=None)
    head = line(Piece("Counters only: ", "warn"), "packets may not be read")
    if link.link_kbps is None:
        return [head, line(Piece("link load not known: the counters cannot be read", "faint"))]
    figures = line(
        Piece("link load ", "faint"),
        kbps(link.link_kbps),
        Piece(" kbit/s in the busier direction", "faint"),
    )
    if not capacity or capacity <= 0:
        return [
            head,
            figures,
            line(Piece("capacity not in the plan: no room can be told", "faint")),
        ]
    strip = max(1, min(cells - 1, 100))
    taken = min(strip, max(0, round(link.link_kbps / capacity * strip)))
    bar = line(Piece(LOAD * taken, "accent"), Piece(LOAD_FREE * (strip - taken), "good"))
    return [head, bar, (*figures[:2], Piece(f" of {kbps(capacity).strip()} kbit/s", "faint"))]


def links_lines(snapshot: Snapshot, chosen: int, space: Space, blocks: int) -> list[Line]:
    """Returns as many links in full as `blocks`, the chosen one first, and the others by name."""
    links = snapshot.links
    if not links:
        return _no_link(snapshot, space)
    order = [links[(chosen + step) % len(links)] for step in range(min(blocks, len(links)))]
    shown = [row for link in order for row in link_block(snapshot, link, space)]
    if len(links) > len(order):
        shown.append(_chips(snapshot, chosen, space.width))
    return [fitted(row, space.width) for row in shown]


def _chips(snapshot: Snapshot, chosen: int, cells: int) -> Line:
    """Returns all links by name and word on one line, from the chosen one on if they are many."""
    pieces: list[Piece | str] = []
    links = snapshot.links
    for step in range(len(links)):
        link = links[(chosen + step) % len(links)]
        verdict = verdict_on(link, hearing=snapshot.tap.hearing)
        name = f" {'►' if not step else ' '}{safe(link.name, 16)} "
        pieces += [
            Piece(name, "strong" if not step else "faint"),
            Piece(verdict.word or NOTHING, verdict.tone),
        ]
        if len(plain(line(*pieces))) > cells:
            break
    return line(*pieces)


def _no_link(snapshot: Snapshot, space: Space) -> list[Line]:
    """Returns what can be said without any link in the plan."""
    words = [
        line(" ", Piece("No plan", "strong"), f"  {snapshot.calls_up} calls up"),
        line(" ", Piece("Without a plan there is no budget to hold calls against.", "faint")),
        line(" ", Piece("Give one with --plan: its links, their framing and budget.", "faint")),
    ]
    return [fitted(row, space.width) for row in words]
