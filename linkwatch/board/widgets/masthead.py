"""The first line: where this is, what is up, and how late it is."""

from textual.geometry import Size

from linkwatch.board.lines import Line, Piece, fitted, line, width
from linkwatch.board.text import clock, count, safe
from linkwatch.board.widgets.sheet import Sheet
from linkwatch.watch.snapshot import Snapshot

SITE_CELLS = 28


def masthead_line(title: str, snapshot: Snapshot, paused: int | None, cells: int) -> Line:
    """Returns the first line.

    Args:
        title: What is watched, in a word.
        snapshot: What is shown.
        paused: The time at which the picture was paused, nanoseconds, or None.
        cells: Width.
    """
    up = count(snapshot.calls_up, "call") + " up"
    if not snapshot.tap.hearing:
        up = "calls not heard"
    elif snapshot.elsewhere_up:
        up += f", {snapshot.elsewhere_up} elsewhere"
    left = line(
        " ",
        Piece("Linkwatch", "accent"),
        Piece(f"  {safe(snapshot.site or title, SITE_CELLS)}", "strong"),
        f"  {up}",
        Piece(f"  tap {safe(snapshot.tap.name, 20)}", "faint"),
    )
    right = line(Piece(f" {clock(snapshot.time)} ", "strong"))
    if paused is not None:
        right = line(Piece(f" PAUSED at {clock(paused)} ", "cursor"))
    return (*fitted(left, cells - width(right)), *right)


class Masthead(Sheet, can_focus=False):
    """The first line of the dashboard."""

    def __init__(self, title: str) -> None:
        super().__init__(id="masthead")
        self._title = title
        self.paused: int | None = None

    def pause(self, time: int | None) -> None:
        """Says since when the picture is held (nanoseconds), or no longer."""
        self.paused = time
        self.redraw()

    def lines_of(self, snapshot: Snapshot, space: Size) -> list[Line]:
        """Returns the one line."""
        return [masthead_line(self._title, snapshot, self.paused, space.width)]
