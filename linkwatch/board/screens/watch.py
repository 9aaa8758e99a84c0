"""The board itself: the links above, the panes below."""

from typing import ClassVar

from textual import events
from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.containers import Horizontal, Vertical
from textual.content import Content
from textual.screen import Screen
from textual.widgets import Static

from linkwatch.board.text import safe
from linkwatch.board.widgets.alarms import Alarms
from linkwatch.board.widgets.banner import Banner
from linkwatch.board.widgets.calls import Calls
from linkwatch.board.widgets.keyline import KeyLine
from linkwatch.board.widgets.links import Links
from linkwatch.board.widgets.masthead import Masthead
from linkwatch.board.widgets.panebar import PANES, PaneBar
from linkwatch.board.widgets.sheet import Sheet
from linkwatch.board.widgets.tap import TapPane
from linkwatch.board.widgets.trend import Trend
from linkwatch.watch.snapshot import Snapshot

END_CELLS = 600


class WatchScreen(Screen[None]):
    """Links, calls, alarms, trend and tap. A small screen shows one of the four panes at a time."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("tab", "pane(1)", "pane", id="pane.next", tooltip="the next pane"),
        Binding("shift+tab", "pane(-1)", "pane back", show=False, id="pane.previous",
                tooltip="the pane before"),
        Binding("a", "go('alarms')", "alarms", id="pane.alarms", tooltip="the alarms"),
        Binding("t", "span", "trend", id="trend.span",
                tooltip="the trend; again: over 5, 15 or 60 minutes"),
        Binding("l", "link", "link", id="link.next", tooltip="the next link"),
    ]  # fmt: skip

    def __init__(self, title: str) -> None:
        super().__init__()
        self._title = title
        self.pane = PANES[0]

    def compose(self) -> ComposeResult:
        """Lays out the board."""
        yield Masthead(self._title)
        yield Banner()
        yield Links()
        yield PaneBar()
        with Horizontal(id="panes"):
            yield Calls()
            with Vertical(id="side"):
                yield Alarms()
                yield Trend()
                yield TapPane()
        yield Static("", id="ending")
        yield KeyLine()

    def on_mount(self) -> None:
        """Names the panes and begins with the calls."""
        for pane in self.query(".pane"):
            pane.border_title = Content(f" {pane.id} ")
        self.query_one(PaneBar).minutes = self.query_one(Trend).minutes
        self.action_go(PANES[0])

    def take(self, snapshot: Snapshot) -> None:
        """Shows a new snapshot."""
        for sheet in self.query(Sheet):
            sheet.take(snapshot)

    def remember(self, snapshot: Snapshot) -> None:
        """Keeps a snapshot for the trend, although the picture is held."""
        self.query_one(Trend).remember(snapshot)

    def end(self, text: str) -> None:
        """Says why no snapshot follows."""
        ending = self.query_one("#ending", Static)
        ending.update(Content(f" ■ {safe(text, END_CELLS)}"))
        ending.add_class("-shown")

    def action_pane(self, step: int) -> None:
        """Goes to the next pane, or the one before."""
        self.action_go(PANES[(PANES.index(self.pane) + step) % len(PANES)])

    def action_go(self, pane: str) -> None:
        """Goes to a pane."""
        self._in_front(pane)
        self.query_one(f"#{pane}").focus(scroll_visible=False)

    def action_span(self) -> None:
        """Goes to the trend; if it is there already, changes its span."""
        trend, bar = self.query_one(Trend), self.query_one(PaneBar)
        if self.pane == "trend":
            trend.change_span()
        bar.minutes = trend.minutes
        bar.redraw()
        self.action_go("trend")

    def action_link(self) -> None:
        """Puts the next link in front."""
        links = self.query_one(Links)
        links.choose_next()
        self.query_one(Trend).choose(links.chosen)

    def check_action(
        self,
        action: str,
        parameters: tuple[object, ...],  # noqa: ARG002 - the framework passes it
    ) -> bool | None:
        """Hides the key for the next link where there is but one."""
        snapshot = self.query_one(Links).snapshot if self.is_mounted else None
        return action != "link" or bool(snapshot and len(snapshot.links) > 1)

    def on_descendant_focus(self, event: events.DescendantFocus) -> None:
        """Follows the focus, however it came to a pane."""
        if event.widget.id in PANES:
            self._in_front(event.widget.id)

    def on_pane_bar_picked(self, picked: PaneBar.Picked) -> None:
        """Goes to the pane that was clicked."""
        self.action_go(picked.pane)

    def _in_front(self, pane: str) -> None:
        panes = self.query_one("#panes")
        if panes.has_class(f"-{pane}"):
            return
        self.pane = pane
        panes.set_classes(f"-{pane}")
        self.query_one(PaneBar).point_to(pane)
