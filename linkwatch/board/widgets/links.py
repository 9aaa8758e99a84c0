"""The links: the chosen one in full, others as there is space."""

from textual.geometry import Size

from linkwatch.board.lines import Line
from linkwatch.board.linkblock import Space, links_lines
from linkwatch.board.widgets.sheet import Sheet
from linkwatch.watch.snapshot import Snapshot

COMPACT_ROWS, COMPACT_CELLS = 20, 70
AIRY_ROWS = 34
BLOCK_ROWS = 12  # of the screen, for each link shown in full


class Links(Sheet, can_focus=False):
    """The links of the plan."""

    def __init__(self) -> None:
        super().__init__(id="links")
        self.chosen = 0

    def choose_next(self) -> None:
        """Puts the next link in front."""
        if self.snapshot and self.snapshot.links:
            self.chosen = (self.chosen + 1) % len(self.snapshot.links)
            self.redraw()

    def lines_of(self, snapshot: Snapshot, space: Size) -> list[Line]:
        """Returns the lines of as many links as the screen has space for."""
        screen = self.screen.size
        room = Space(
            space.width,
            compact=screen.height < COMPACT_ROWS or space.width < COMPACT_CELLS,
            airy=screen.height >= AIRY_ROWS,
        )
        blocks = max(1, screen.height // BLOCK_ROWS // 2)
        if snapshot.links:
            self.chosen %= len(snapshot.links)
        lines = links_lines(snapshot, self.chosen, room, blocks)
        self.styles.height = len(lines)
        return lines
