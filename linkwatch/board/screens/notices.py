"""Pages that lie over the board until a key is pressed: the cautions at the start, and help."""

from collections.abc import Sequence
from typing import ClassVar

from textual import events
from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.containers import VerticalScroll
from textual.content import Content
from textual.screen import ModalScreen
from textual.widgets import Static

from linkwatch.board.text import safe

MOST_CELLS = 2000
SCROLLING = frozenset({"up", "down", "pageup", "pagedown", "home", "end"})


class Cautions(ModalScreen[None]):
    """What must be known before calls are watched; any key closes it.

    Args:
        cautions: A sentence or two each.
    """

    def __init__(self, cautions: Sequence[str]) -> None:
        super().__init__(id="cautions")
        self._cautions = cautions

    def compose(self) -> ComposeResult:
        """Lays out the notice."""
        with VerticalScroll(classes="sheet-over"):
            yield Static(Content("Before you watch"), classes="notice-title")
            for caution in self._cautions:
                yield Static(Content(safe(caution, MOST_CELLS)), classes="notice-text")
            yield Static(Content("Any key goes on."), classes="notice-foot")

    def on_key(self, event: events.Key) -> None:
        """Closes on any key that does not scroll."""
        if event.key not in SCROLLING:
            event.stop()
            self.dismiss()

    def on_click(self) -> None:
        """Closes."""
        self.dismiss()


GLYPHS = (
    ("■", "a place of the budget, taken; a dear call takes several"),
    ("□", "a place that is free"),
    ("○ ●", "a place kept in reserve; the same, taken"),
    ("┃ ►", "the end of the budget; what is over it"),
    ("━ ═", "what the packets seen use; the same beyond the budget"),
    ("█ ░ ▓", "in the trend: used, reserved, used beyond the budget"),
    ("!", "trouble: the state says which; or: not as planned"),
)
KEYS = (
    ("tab", "the next pane; shift-tab the one before"),
    ("↑ ↓ enter", "choose a call and open it; esc goes back"),
    ("o", "calls by number, or those in trouble first"),
    ("a", "the alarms"),
    ("t", "the trend over 5, 15 or 60 minutes"),
    ("l", "the next link"),
    ("p", "hold the picture; what is heard goes on being counted"),
    ("s", "save the screen as an SVG file"),
    ("ctrl+p", "more commands, and other colours"),
    ("q", "leave"),
)
COLUMNS = (
    "Loss is in percent, jitter in ms, ms is the packetisation, mark the DSCP marking. Columns go "
    "when space is short, in this order: MOS, reserved, age, ms, mark, jitter, loss, call number. "
    "A call's page has them all."
)


class Help(ModalScreen[None]):
    """Keys and signs."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("escape,enter,q,question_mark", "dismiss", "back", id="help.back",
                tooltip="back to the board"),
    ]  # fmt: skip

    def compose(self) -> ComposeResult:
        """Lays out the page."""
        with VerticalScroll(classes="sheet-over"):
            yield Static(Content("Keys"), classes="notice-title")
            yield Static(_table(KEYS), classes="notice-text")
            yield Static(Content("Signs"), classes="notice-title")
            yield Static(_table(GLYPHS), classes="notice-text")
            yield Static(Content(COLUMNS), classes="notice-text")
            yield Static(Content("Esc goes back."), classes="notice-foot")

    def on_mount(self) -> None:
        """Lets the arrows scroll."""
        self.query_one(VerticalScroll).focus()


def _table(entries: Sequence[tuple[str, str]]) -> Content:
    return Content("\n").join(
        Content.assemble((f"{sign:<11}", "bold"), meaning) for sign, meaning in entries
    )
