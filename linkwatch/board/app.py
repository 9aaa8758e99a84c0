"""The dashboard's frame: it takes the feed's snapshots and hands them to the screen in front."""

from collections.abc import Sequence
from datetime import datetime
from pathlib import Path
from typing import ClassVar

from textual.app import App
from textual.binding import Binding, BindingType
from textual.message import Message

from linkwatch.board.feed import Feed
from linkwatch.board.screens.call import CallPage
from linkwatch.board.screens.notices import Cautions, Help
from linkwatch.board.screens.watch import WatchScreen
from linkwatch.board.text import safe
from linkwatch.board.theme import NIGHT
from linkwatch.board.widgets.calls import Calls
from linkwatch.board.widgets.masthead import Masthead
from linkwatch.errors import LinkwatchError
from linkwatch.watch.snapshot import Snapshot

SAID_CELLS = 400
SAID_SECONDS = 8


class Arrived(Message, bubble=False):
    """A snapshot has come from the feed."""

    def __init__(self, snapshot: Snapshot) -> None:
        super().__init__()
        self.snapshot = snapshot

    def can_replace(self, message: Message) -> bool:
        """A late screen shows only the newest snapshot."""
        return isinstance(message, Arrived)


class Finished(Message, bubble=False):
    """The feed has ended."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.text = text


class Board(App[int]):
    """The dashboard. `run` returns the exit status, or None where it failed with a traceback.

    Args:
        title: What is watched, shown where the plan names no site.
        feed: Where snapshots come from; it is started and stopped here.
        cautions: What must be known before calls are watched, a sentence or two each.
        screenshots: The folder that saved screens go to; the current one if not given.
    """

    CSS_PATH = "board.tcss"
    HORIZONTAL_BREAKPOINTS = [(0, "-narrow"), (120, "-wide")]  # noqa: RUF012 - as the base has it
    VERTICAL_BREAKPOINTS = [(0, "-short"), (30, "-tall")]  # noqa: RUF012 - as the base has it
    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("p", "pause", "hold", id="board.pause",
                tooltip="hold the picture; counting goes on"),
        Binding("s", "save", "save", show=False, id="board.save",
                tooltip="save the screen as an SVG file"),
        Binding("question_mark", "help", "help", id="board.help", key_display="?",
                tooltip="keys and signs"),
        Binding("q", "quit", "quit", id="board.quit", tooltip="leave"),
    ]  # fmt: skip

    def __init__(
        self,
        title: str,
        feed: Feed,
        cautions: Sequence[str] = (),
        screenshots: Path | None = None,
    ) -> None:
        super().__init__()
        self.title = safe(title, 60)
        self._feed = feed
        self._cautions = cautions
        self._screenshots = screenshots
        self._latest: Snapshot | None = None
        self._shown: Snapshot | None = None
        self._paused = False
        self.watch_screen = WatchScreen(title)
        self.register_theme(NIGHT)
        self.theme = NIGHT.name

    def get_default_screen(self) -> WatchScreen:
        """Returns the board itself as the lowest screen."""
        return self.watch_screen

    def on_mount(self) -> None:
        """Starts the feed, and says what must be known first."""
        if self._cautions:
            self.push_screen(Cautions(self._cautions))
        try:
            self._feed.start(self._publish, self._finished)
        except LinkwatchError as error:
            self._finished(str(error))

    def on_unmount(self) -> None:
        """Stops the feed."""
        self._feed.stop()

    def _publish(self, snapshot: Snapshot) -> None:
        self.post_message(Arrived(snapshot))

    def _finished(self, text: str) -> None:
        self.post_message(Finished(text))

    def on_arrived(self, arrived: Arrived) -> None:
        """Shows a snapshot, unless the picture is held."""
        self._latest = arrived.snapshot
        self.watch_screen.remember(arrived.snapshot)
        if not self._paused:
            self._show(arrived.snapshot)

    def _show(self, snapshot: Snapshot) -> None:
        first, self._shown = self._shown is None, snapshot
        for screen in self._boards():
            screen.take(snapshot)
        if first:
            self.watch_screen.refresh_bindings()

    def _boards(self) -> list[WatchScreen | CallPage]:
        """Returns the open screens that show snapshots."""
        return [s for s in self.screen_stack if isinstance(s, WatchScreen | CallPage)]

    def on_finished(self, finished: Finished) -> None:
        """Says why no snapshot follows; the last one stays."""
        self.watch_screen.end(finished.text)

    def on_calls_opened(self, opened: Calls.Opened) -> None:
        """Opens a call's page."""
        if self._shown:
            self.push_screen(CallPage(self.title, opened.call, self._shown))
            self.call_after_refresh(self._mark_paused)

    def action_pause(self) -> None:
        """Holds the picture, or lets it go on with the latest snapshot."""
        if self._latest is None:
            return
        self._paused = not self._paused
        self._mark_paused()
        if not self._paused:
            self._show(self._latest)

    def _mark_paused(self) -> None:
        """Says on every open screen that the picture is held, or no longer."""
        since = self._shown.time if self._paused and self._shown else None
        for screen in self._boards():
            screen.query_one(Masthead).pause(since)

    def action_help(self) -> None:
        """Opens the help page."""
        self.push_screen(Help())

    def action_save(self) -> None:
        """Saves the screen as an SVG file and says where."""
        folder = self._screenshots or Path.cwd()
        path = folder / f"linkwatch-{datetime.now().astimezone():%Y%m%d-%H%M%S}.svg"
        try:
            path.write_text(self.export_screenshot(), encoding="utf-8")
        except OSError as error:
            reason = error.strerror or "not possible"
            self._tell(f"The screen was not saved: {path}: {reason}")
        else:
            self._tell(f"Screen saved: {path}")

    def _tell(self, text: str) -> None:
        self.notify(safe(text, SAID_CELLS), markup=False, timeout=SAID_SECONDS)

    async def action_quit(self) -> None:
        """Leaves with exit status 0."""
        self.exit(0)
