"""The page of one call."""

from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.geometry import Size
from textual.screen import Screen

from linkwatch.board.callpage import call_lines
from linkwatch.board.lines import Line, Piece, line
from linkwatch.board.widgets.banner import Banner
from linkwatch.board.widgets.keyline import KeyLine
from linkwatch.board.widgets.masthead import Masthead
from linkwatch.board.widgets.sheet import Sheet
from linkwatch.watch.snapshot import CallState, Snapshot


class CallSheet(Sheet, can_focus=True):
    """A call's figures, which go on while it is looked at."""

    def __init__(self, call: CallState) -> None:
        super().__init__(id="callsheet")
        self._call = call

    def lines_of(self, snapshot: Snapshot, space: Size) -> list[Line]:
        """Returns the call's lines; the last ones known once it has left the list."""
        found = next((call for call in snapshot.calls if call.id == self._call.id), None)
        if found is None:
            gone = " This call has left the list; these are its last figures."
            return [line(Piece(gone, "warn")), *call_lines(snapshot, self._call, space.width)]
        self._call = found
        return call_lines(snapshot, found, space.width)


class CallPage(Screen[None]):
    """One call, both directions side by side."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("escape,enter,backspace", "dismiss", "back", id="call.back", key_display="esc",
                tooltip="back to the board"),
    ]  # fmt: skip

    def __init__(self, title: str, call: CallState, snapshot: Snapshot) -> None:
        super().__init__()
        self._title = title
        self._call = call
        self._snapshot = snapshot

    def compose(self) -> ComposeResult:
        """Lays out the page."""
        yield Masthead(self._title)
        yield Banner()
        yield CallSheet(self._call)
        yield KeyLine()

    def on_mount(self) -> None:
        """Shows the call as it stood when it was opened."""
        self.take(self._snapshot)
        self.query_one(CallSheet).focus()

    def take(self, snapshot: Snapshot) -> None:
        """Takes in a new snapshot."""
        for sheet in self.query(Sheet):
            sheet.take(snapshot)
