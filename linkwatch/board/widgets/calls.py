"""The table of calls. It draws only the rows in sight, so thousands cost what a screenful does."""

from dataclasses import dataclass
from typing import ClassVar

from textual import events
from textual.binding import Binding, BindingType
from textual.geometry import Size
from textual.message import Message

from linkwatch.board.callcolumns import Row, call_line, head_line
from linkwatch.board.lines import BLANK, Line, Piece, fitted, line, plain
from linkwatch.board.text import wrapped
from linkwatch.board.widgets.sheet import Sheet
from linkwatch.watch.snapshot import Alarm, CallState, Snapshot

HEAD_ROWS = 1


def alarmed_calls(alarms: tuple[Alarm, ...]) -> frozenset[str]:
    """Returns the numbers of the calls on which alarms stand."""
    words = (alarm.subject.split(maxsplit=2) for alarm in alarms)
    return frozenset(word[1] for word in words if len(word) > 1 and word[0] == "call")


def rows_of(snapshot: Snapshot, *, troubled_first: bool) -> list[Row]:
    """Returns the rows in their order: calls that are up before those that ended, by number."""
    alarmed = alarmed_calls(snapshot.alarms)
    rows = [Row(call, snapshot.time, str(call.id) in alarmed) for call in snapshot.calls]
    rows.sort(
        key=lambda row: (
            not row.call.up,
            troubled_first and not row.troubled,
            row.call.id,
        )
    )
    return rows


class Calls(Sheet, can_focus=True):
    """The calls that are up, and those that ended a short while ago."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("up", "step(-1)", "up", show=False, id="calls.up", tooltip="the call above"),
        Binding("down", "step(1)", "down", show=False, id="calls.down", tooltip="the call below"),
        Binding("pageup", "leaf(-1)", "page up", show=False, id="calls.pageup",
                tooltip="a page up"),
        Binding("pagedown", "leaf(1)", "page down", show=False, id="calls.pagedown",
                tooltip="a page down"),
        Binding("home", "step(-1000000)", "first", show=False, id="calls.first",
                tooltip="the first call"),
        Binding("end", "step(1000000)", "last", show=False, id="calls.last",
                tooltip="the last call"),
        Binding("enter", "open", "call", id="calls.open", tooltip="open the call under the cursor"),
        Binding("o", "order", "order", show=False, id="calls.order",
                tooltip="order by number, or calls in trouble first"),
    ]  # fmt: skip

    @dataclass
    class Opened(Message):
        """A call was asked for.

        Attributes:
            call: The call as it stood.
        """

        call: CallState

    def __init__(self) -> None:
        super().__init__(id="calls", classes="pane")
        self.troubled_first = False
        self.rows: list[Row] = []
        self.cursor = 0
        self._top = 0

    @property
    def at_cursor(self) -> CallState | None:
        """The call under the cursor."""
        return self.rows[self.cursor].call if self.rows else None

    def redraw(self) -> None:
        """Takes the rows of the snapshot; the cursor stays on its call."""
        if self.snapshot is None or not self.is_attached:
            return
        chosen = self.at_cursor
        self.rows = rows_of(self.snapshot, troubled_first=self.troubled_first)
        if chosen:
            found = (i for i, row in enumerate(self.rows) if row.call.id == chosen.id)
            self.cursor = next(found, min(self.cursor, max(0, len(self.rows) - 1)))
        self.virtual_size = Size(self._cells, HEAD_ROWS + len(self.rows))
        self._repaint()

    @property
    def _cells(self) -> int:
        return self.scrollable_content_region.width

    def _repaint(self) -> None:
        """Paints the rows in sight that have changed."""
        top, cells = self.scroll_offset.y, self._cells
        if not cells:
            return
        before, self._painted = self._painted, self._in_sight(top, cells, self.size.height)
        self._top = top
        for y, shown in enumerate(self._painted):
            if before[y : y + 1] != [shown]:
                self.refresh_line(y + top)
        if len(before) > len(self._painted):
            self.refresh()

    def _in_sight(self, top: int, cells: int, height: int) -> list[Line]:
        head = head_line(cells)
        if not self.rows:
            return [head, *self._nothing(cells)]
        seen = range(top, min(top + height - HEAD_ROWS, len(self.rows)))
        return [head, *(self._row(index, cells) for index in seen)]

    def _row(self, index: int, cells: int) -> Line:
        shown = call_line(self.rows[index], cells)
        if index != self.cursor or not self.has_focus:
            return shown
        return (Piece(plain(fitted(shown, cells)), "cursor"),)

    def _nothing(self, cells: int) -> list[Line]:
        """Returns why no call is shown."""
        if self.snapshot is None or self.snapshot.tap.hearing:
            return [BLANK, line(Piece("  no call is heard yet", "faint"))]
        words = ["Counters only: packets may not be read here, so no call is seen."]
        words += self.snapshot.tap.remarks
        rows = [row for text in words for row in (*wrapped(text, cells - 4), "")]
        return [BLANK, *(line(Piece(f"  {row}", "faint")) for row in rows)]

    def line_at(self, y: int) -> Line:
        """Returns the line at a height of what can be scrolled over; the heading stays on top."""
        row = y - self.scroll_offset.y
        if self._top != self.scroll_offset.y:
            self._top = self.scroll_offset.y
            self._painted = self._in_sight(self._top, self._cells, self.size.height)
        return self._painted[row] if 0 <= row < len(self._painted) else BLANK

    def move_to(self, index: int) -> None:
        """Moves the cursor to a row, as near as there is one, and shows that row."""
        self.cursor = max(0, min(index, len(self.rows) - 1))
        leaf = max(1, self.size.height - HEAD_ROWS)
        top = self.scroll_offset.y
        if self.cursor < top:
            self.scroll_to(y=self.cursor, animate=False)
        elif self.cursor >= top + leaf:
            self.scroll_to(y=self.cursor - leaf + 1, animate=False)
        self._repaint()

    def action_step(self, rows: int) -> None:
        """Moves the cursor by so many rows."""
        self.move_to(self.cursor + rows)

    def action_leaf(self, pages: int) -> None:
        """Moves the cursor by so many pages."""
        self.move_to(self.cursor + pages * max(1, self.size.height - HEAD_ROWS - 1))

    def action_order(self) -> None:
        """Changes between the order by number and calls in trouble first."""
        self.troubled_first = not self.troubled_first
        self.redraw()
        self.move_to(self.cursor)

    def action_open(self) -> None:
        """Opens the call under the cursor."""
        if call := self.at_cursor:
            self.post_message(self.Opened(call))

    def on_click(self, event: events.Click) -> None:
        """Moves the cursor to the row that was clicked; a second click opens it."""
        index = event.y - HEAD_ROWS + self.scroll_offset.y
        if event.y < HEAD_ROWS or index >= len(self.rows):
            return
        again = event.chain > 1 and index == self.cursor
        self.move_to(index)
        if again:
            self.action_open()

    def on_focus(self) -> None:
        """Shows the cursor."""
        self._repaint()

    def on_blur(self) -> None:
        """Hides the cursor."""
        self._repaint()
