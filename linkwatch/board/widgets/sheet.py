"""The base of every pane: lines of pieces, painted only where they have changed."""

from typing import ClassVar

from rich.segment import Segment
from textual import events
from textual.geometry import Size
from textual.scroll_view import ScrollView
from textual.strip import Strip

from linkwatch.board.lines import TONES, Line, plain, width
from linkwatch.board.text import safe
from linkwatch.watch.snapshot import Snapshot


class Sheet(ScrollView):
    """Shows the lines that a subclass makes of a snapshot."""

    COMPONENT_CLASSES: ClassVar[set[str]] = {f"sheet--{tone}" for tone in TONES}

    def __init__(self, *, id: str | None = None, classes: str | None = None) -> None:  # noqa: A002
        super().__init__(id=id, classes=classes)
        self.snapshot: Snapshot | None = None
        self._painted: list[Line] = []

    def lines_of(self, snapshot: Snapshot, space: Size) -> list[Line]:
        """Returns what to show of a snapshot in so many cells and rows; for a subclass to say."""
        raise NotImplementedError

    def take(self, snapshot: Snapshot) -> None:
        """Takes in a new snapshot, and paints what has changed of it."""
        self.snapshot = snapshot
        self.redraw()

    def redraw(self) -> None:
        """Makes the lines again, and paints those that have changed."""
        space = self.scrollable_content_region
        if self.snapshot is None or not self.is_attached or not space.width:
            return
        self._paint(self.lines_of(self.snapshot, Size(space.width, self.size.height)))

    def _paint(self, lines: list[Line]) -> None:
        before, self._painted = self._painted, lines
        self.virtual_size = Size(self.scrollable_content_region.width, len(lines))
        for y in range(max(len(before), len(lines))):
            if before[y : y + 1] != lines[y : y + 1]:
                self.refresh_line(y)

    def on_resize(self, _: events.Resize) -> None:
        """Makes the lines fit."""
        self._painted = []
        self.redraw()

    def on_show(self, _: events.Show) -> None:
        """Shows what came in while the pane was hidden."""
        self.redraw()

    def notify_style_update(self) -> None:
        """Paints everything again in a new theme's colours."""
        super().notify_style_update()
        self.refresh()

    def strip_of(self, line: Line) -> Strip:
        """Returns a line as it goes to the terminal: nothing that could steer it passes here."""
        segments = [
            Segment(
                piece.text if piece.text.isprintable() else safe(piece.text, len(piece.text)),
                self.get_component_rich_style(f"sheet--{piece.tone}"),
            )
            for piece in line
        ]
        return Strip(segments, width(line))

    def line_at(self, y: int) -> Line:
        """Returns the line at a height of what can be scrolled over, nothing below the last."""
        return self._painted[y] if 0 <= y < len(self._painted) else ()

    def render_line(self, y: int) -> Strip:
        """Returns the strip at a height of the pane."""
        strip = self.strip_of(self.line_at(y + self.scroll_offset.y))
        return strip.crop_extend(0, self.size.width, self.get_component_rich_style("sheet--plain"))

    @property
    def words(self) -> str:
        """What stands on the sheet, as text."""
        return "\n".join(plain(line).rstrip() for line in self._painted)
