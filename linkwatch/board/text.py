"""Words and figures as they stand on the screen: bounded, harmless, of a width that does not dance.

Names, file names and remarks come from plan files, signalling and file systems. They may hold codes
that move the cursor, turn the writing round or hide in no width at all: `safe` lets none through.
"""

import unicodedata
from datetime import datetime
from functools import lru_cache

from rich.cells import cell_len, get_character_cell_size

from linkwatch.watch.snapshot import Alarm, Severity

REPLACEMENT = "\N{REPLACEMENT CHARACTER}"
ELLIPSIS = "…"
MARKS_PER_LETTER = 2  # enough for any living script; a tower of marks would leave its line
# Marks that change how wide or how joined their neighbours are: the grapheme joiner, the Mongolian
# selectors and the variation selectors.
JOINERS = frozenset({0x034F, *range(0x180B, 0x1810), *range(0xFE00, 0xFE10)}) | frozenset(
    range(0xE0100, 0xE01F0)
)
NOTHING = "-"

SIGNS = {
    Severity.CRITICAL: "!!!",
    Severity.MAJOR: "!! ",
    Severity.MINOR: "!  ",
    Severity.WARNING: "?  ",
}
TONES = {
    Severity.CRITICAL: "alarm",
    Severity.MAJOR: "alarm",
    Severity.MINOR: "warn",
    Severity.WARNING: "warn",
}


def safe(text: str, limit: int) -> str:
    """Returns a foreign text made harmless and at most `limit` cells wide.

    Control codes, bidi controls, zero-width and private characters, halves of surrogate pairs and
    letters of no width become U+FFFD; what is too long ends in an ellipsis.
    """
    if text.isascii() and text.isprintable() and len(text) <= limit:
        return text
    return _cleaned(text[: max(limit, 0) * (1 + MARKS_PER_LETTER) + 2], limit)


@lru_cache(maxsize=4096)
def _cleaned(text: str, limit: int) -> str:
    """Returns what `safe` returns; the text is no longer than what the limit can need."""
    most = max(limit, 0) * (1 + MARKS_PER_LETTER) + 1
    shown = "".join(_harmless(text[:most]))
    if len(text) <= most and cell_len(shown) <= limit:
        return shown
    while shown and cell_len(shown) >= limit:
        shown = shown[:-1]
    return shown + ELLIPSIS if limit > 0 else ""


def _harmless(text: str) -> list[str]:
    shown: list[str] = []
    marks = MARKS_PER_LETTER  # a mark without a letter before it has nothing to stand on
    for letter in text:
        if letter != " " and unicodedata.category(letter) == "Zs":
            letter = " "
        if unicodedata.combining(letter) or unicodedata.category(letter) in ("Mn", "Mc", "Me"):
            marks += 1
            if marks > MARKS_PER_LETTER or ord(letter) in JOINERS:
                letter = REPLACEMENT
        elif not letter.isprintable() or not get_character_cell_size(letter):
            letter, marks = REPLACEMENT, MARKS_PER_LETTER
        else:
            marks = 0
        shown.append(letter)
    return shown


def wrapped(text: str, width: int, most: int = 6) -> list[str]:
    """Returns a foreign text as at most `most` lines of at most `width` cells, broken at spaces."""
    width = max(width, 1)
    lines = [""]
    for word in safe(text, width * most).split():
        for piece in _pieces(word, width):
            if not lines[-1]:
                lines[-1] = piece
            elif cell_len(lines[-1]) + 1 + cell_len(piece) <= width:
                lines[-1] += f" {piece}"
            else:
                lines.append(piece)
    if len(lines) > most:
        lines[most - 1 :] = [safe(" ".join(lines[most - 1 :]), width)]
    return lines


def _pieces(word: str, width: int) -> list[str]:
    """Cuts a word that is longer than a line."""
    pieces = [""]
    for letter in word:
        if pieces[-1] and cell_len(pieces[-1] + letter) > width:
            pieces.append("")
        pieces[-1] += letter
    return pieces


def padded(text: str, width: int, *, right: bool = False) -> str:
    """Returns a text cut or filled to exactly `width` cells, on the right edge if `right`."""
    text = safe(text, width)
    gap = " " * (width - cell_len(text))
    return gap + text if right else text + gap


def kbps(value: float | None) -> str:
    """Returns a rate in kbit/s in seven cells."""
    if value is None:
        return f"{NOTHING:>7}"
    return f"{value:7.1f}" if abs(value) < 99_999.95 else safe(f"{value:7.3g}", 7)


def decimal(value: float | None, width: int, places: int = 1) -> str:
    """Returns a figure in `width` cells, a dash where it is not known."""
    if value is None:
        return NOTHING.rjust(width)
    for shown in (f"{value:.{places}f}", f"{value:.0f}", f"{value:.0e}"):
        if len(shown) <= width:
            return shown.rjust(width)
    return ELLIPSIS.rjust(width)


def clock(time: int | None) -> str:
    """Returns a time (nanoseconds since 1970 UTC) as local HH:MM:SS."""
    if time is None:
        return "--:--:--"
    try:
        return f"{datetime.fromtimestamp(time / 1e9).astimezone():%H:%M:%S}"
    except (OverflowError, OSError, ValueError):
        return "--:--:--"


def duration(nanoseconds: int) -> str:
    """Returns a length of time in seven cells: minutes and seconds, from an hour on with hours."""
    seconds = max(0, nanoseconds) // 1_000_000_000
    hours, rest = divmod(seconds, 3600)
    if hours >= 100:
        return f"{min(hours // 24, 99_999):>5} d"
    if hours:
        return f"{hours}:{rest // 60:02}:{rest % 60:02}".rjust(7)
    return f"{rest // 60}:{rest % 60:02}".rjust(7)


def count(number: int, thing: str) -> str:
    """Returns a number of things, such as "1 call" or "2 calls"."""
    return f"{number} {thing}" if number == 1 else f"{number} {thing}s"


def alarm_words(alarm: Alarm) -> str:
    """Returns what an alarm is about: its link, if any, and its subject."""
    return f"{alarm.link} {alarm.subject}".strip()
