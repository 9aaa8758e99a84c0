"""The last line: the keys that do something now."""

from textual import events
from textual.screen import Screen

from linkwatch.board.lines import Line, Piece, fitted, line, width
from linkwatch.board.widgets.sheet import Sheet

ALWAYS_SHOWN = 2  # the last ones: help and the way out

Key = tuple[str, str, str]  # the key, how it is written, what it does


def shown_keys(keys: list[Key], cells: int) -> list[Key]:
    """Returns the keys that find space in a width; those for help and for leaving stay longest."""
    shown = list(keys)
    while len(shown) > ALWAYS_SHOWN and width(keys_line(shown)) > cells:
        del shown[-ALWAYS_SHOWN - 1]
    return shown


def keys_line(keys: list[Key]) -> Line:
    """Returns the line of keys."""
    pieces: list[Piece] = []
    for _, written, does in keys:
        pieces += [Piece(f" {written}", "strong"), Piece(f" {does} ", "second")]
    return line(*pieces)


class KeyLine(Sheet, can_focus=False):
    """The keys of the screen and of the pane in front; a click on one presses it."""

    def __init__(self) -> None:
        super().__init__(id="keyline")

    def on_mount(self) -> None:
        """Follows the keys, which change with the pane in front."""
        self.screen.bindings_updated_signal.subscribe(self, self._keys_changed)

    def _keys_changed(self, _: Screen[object]) -> None:
        self.redraw()

    def redraw(self) -> None:
        """Paints the keys, if they have changed; they need no snapshot."""
        space = self.scrollable_content_region
        if self.is_attached and space.width:
            self._paint([fitted(keys_line(self._keys(space.width)), space.width)])

    def _keys(self, cells: int) -> list[Key]:
        keys = {
            active.binding.action: (
                active.binding.key,
                self.app.get_key_display(active.binding),
                active.binding.description,
            )
            for active in self.screen.active_bindings.values()
            if active.binding.show and active.enabled
        }
        return shown_keys(list(keys.values()), cells)

    def on_click(self, event: events.Click) -> None:
        """Presses the key that was clicked."""
        edge = 0
        for key in self._keys(self.size.width):
            edge += width(keys_line([key]))
            if event.x < edge:
                self.app.simulate_key(key[0])
                return
