"""Lines as they are painted: pieces of text, each in a tone that the stylesheet colours.

Whatever the board shows is made here as plain data first. So it can be read in a test without a
terminal, compared with what stands on the screen already, and never be taken for markup.
"""

from collections.abc import Iterable
from itertools import groupby
from operator import attrgetter
from typing import NamedTuple

from rich.cells import cell_len

from linkwatch.board.text import padded, safe

TONES = ("plain", "faint", "strong", "good", "warn", "alarm", "accent", "second", "cursor")


class Piece(NamedTuple):
    """A run of text in one tone.

    Attributes:
        text: What is shown.
        tone: One of `TONES`.
    """

    text: str
    tone: str = "plain"


Line = tuple[Piece, ...]
BLANK: Line = ()


def line(*pieces: Piece | str) -> Line:
    """Returns a line of pieces; bare text is in the plain tone."""
    return tuple(piece if isinstance(piece, Piece) else Piece(piece) for piece in pieces if piece)


def joined(pieces: Iterable[Piece]) -> Line:
    """Returns a line in which neighbours of one tone are one piece: fewer are faster to paint."""
    return tuple(
        Piece("".join(piece.text for piece in run), tone)
        for tone, run in groupby(pieces, key=attrgetter("tone"))
    )


def plain(shown: Line) -> str:
    """Returns a line's text without its tones."""
    return "".join(piece.text for piece in shown)


def width(shown: Line) -> int:
    """Returns how many cells a line takes."""
    return sum(cell_len(piece.text) for piece in shown)


def fitted(shown: Line, cells: int) -> Line:
    """Returns a line cut or filled to exactly `cells` cells."""
    pieces: list[Piece] = []
    left = max(cells, 0)
    for piece in shown:
        text = safe(piece.text, left)
        pieces.append(Piece(text, piece.tone))
        left -= cell_len(text)
        if left <= 0:
            break
    if left > 0:
        pieces.append(Piece(" " * left))
    return tuple(pieces)


def beside(left: Iterable[Line], cells: int, right: Iterable[Line]) -> list[Line]:
    """Returns two columns of lines as one, the left one `cells` wide."""
    columns = list(left), list(right)
    height = max(map(len, columns))
    one, two = (column + [BLANK] * (height - len(column)) for column in columns)
    return [(*fitted(a, cells), *b) for a, b in zip(one, two, strict=True)]


def heading(text: str, cells: int) -> Line:
    """Returns a heading with a rule to the right edge."""
    text = safe(text, max(cells - 2, 0))
    return line(
        Piece(text, "second"), Piece(" " + "─" * max(cells - cell_len(text) - 1, 0), "faint")
    )


def labelled(label: str, value: str, tone: str = "plain", cells: int = 16) -> Line:
    """Returns a faint label of `cells` cells and its value."""
    return line(Piece(padded(label, cells), "faint"), Piece(value, tone))
