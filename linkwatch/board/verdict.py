"""What a link comes to in one word: may one more call come in?"""

from dataclasses import dataclass

from linkwatch.board.places import places_of
from linkwatch.board.text import count
from linkwatch.watch.snapshot import DirectionState, LinkState


@dataclass(frozen=True, slots=True)
class Verdict:
    """A word to be read from afar, and what it means.

    Attributes:
        word: Such as "ROOM 5", "FULL" or "OVER 3".
        tone: The tone to paint it in.
        meaning: The same as a short sentence.
        aside: What belongs to it, or "".
    """

    word: str
    tone: str
    meaning: str
    aside: str = ""


def verdict_on(link: LinkState, *, hearing: bool) -> Verdict:
    """Returns what a link comes to: the tighter of its directions decides."""
    if not hearing:
        return _beside_load(link)
    return min(
        (_of_direction(link, way) for way in (link.from_site, link.to_site)),
        key=lambda verdict: verdict[0],
    )[1]


def verdict_on_direction(link: LinkState, way: DirectionState) -> Verdict:
    """Returns what one direction of a link comes to."""
    return _of_direction(link, way)[1]


def _of_direction(link: LinkState, way: DirectionState) -> tuple[float, Verdict]:
    """Returns the places left, to compare directions by, and the verdict."""
    places = places_of(link, way)
    kept = f"{link.reserve_calls} more kept free" if link.reserve_calls else ""
    if way.room_calls is not None and way.room_calls > 0:
        room = way.room_calls
        noun = "planned call fits" if room == 1 else "planned calls fit"
        verdict = Verdict(f"ROOM {room}", "good" if room > 1 else "warn", f"{room} {noun}", kept)
        return way.room_calls, verdict
    over = places.over if places else 0
    if over:
        return -over, Verdict(f"OVER {over}", "alarm", f"{count(over, 'place')} over the budget")
    if way.room_calls is None:
        return float("inf"), Verdict(f"UP {way.calls}", "plain", "no limit in the plan")
    broached = places.taken - (places.total - places.reserve) if places else 0
    if broached > 0:
        kept = f"{broached} of {link.reserve_calls} kept places taken"
    return 0, Verdict("FULL", "warn", "no planned call fits", kept)


def _beside_load(link: LinkState) -> Verdict:
    """Returns what can be said of a link by its interface counters alone."""
    fit = link.fit_beside_load
    if fit is None:
        return Verdict("", "faint", "not known what fits")
    if fit <= 0:
        return Verdict("FULL", "warn", "no planned call fits", "beside all traffic")
    noun = "planned call fits" if fit == 1 else "planned calls fit"
    return Verdict(
        f"FITS {fit}", "good" if fit > 1 else "warn", f"{fit} {noun}", "beside all traffic"
    )
