"""The names of the panes, of which a small screen shows one at a time."""

from textual import events
from textual.geometry import Size
from textual.message import Message

from linkwatch.board.lines import Line, Piece, fitted, line
from linkwatch.board.text import count
from linkwatch.board.widgets.sheet import Sheet
from linkwatch.watch.snapshot import Snapshot

PANES = ("calls", "alarms", "trend", "tap")


def pane_names(snapshot: Snapshot, minutes: int) -> dict[str, str]:
    """Returns each pane's name with the figure one wants before opening it."""
    alarms = count(len(snapshot.alarms), "alarm") if snapshot.alarms else "no alarm"
    drops = "!" if snapshot.tap.dropped or not snapshot.tap.hearing else ""
    return {
        "calls": count(len(snapshot.calls), "call"),
        "alarms": alarms + ("!" if snapshot.alarms else ""),
        "trend": f"trend {minutes} min",
        "tap": f"tap{drops}",
    }


class PaneBar(Sheet, can_focus=False):
    """The panes' names; a click on one goes there."""

    class Picked(Message):
        """A pane was asked for.

        Attributes:
            pane: Its name.
        """

        def __init__(self, pane: str) -> None:
            super().__init__()
            self.pane = pane

    def __init__(self) -> None:
        super().__init__(id="panebar")
        self.minutes = 0
        self.pane = PANES[0]

    def point_to(self, pane: str) -> None:
        """Marks the pane that is in front."""
        self.pane = pane
        self.redraw()

    def lines_of(self, snapshot: Snapshot, space: Size) -> list[Line]:
        """Returns the names in a row."""
        return [fitted(line(*self._pieces(snapshot)), space.width)]

    def _pieces(self, snapshot: Snapshot) -> list[Piece]:
        return [
            Piece(f" ► {name} ", "cursor") if pane == self.pane else Piece(f"   {name} ", "second")
            for pane, name in pane_names(snapshot, self.minutes).items()
        ]

    def on_click(self, event: events.Click) -> None:
        """Goes to the pane whose name was clicked."""
        if self.snapshot is None:
            return
        edge = 0
        for pane, piece in zip(PANES, self._pieces(self.snapshot), strict=True):
            edge += len(piece.text)
            if event.x < edge:
                self.post_message(self.Picked(pane))
                return
