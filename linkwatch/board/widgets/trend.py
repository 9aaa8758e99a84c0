"""The trend: voice against the budget over the last minutes."""

from textual.geometry import Size

from linkwatch.board.history import History, drawn_ways
from linkwatch.board.lines import Line, Piece, line
from linkwatch.board.text import safe
from linkwatch.board.trendgraph import trend_lines
from linkwatch.board.widgets.sheet import Sheet
from linkwatch.watch.snapshot import Snapshot

SPANS_MINUTES = (5, 15, 60)


class Trend(Sheet, can_focus=True):
    """The trend of the chosen link."""

    def __init__(self) -> None:
        super().__init__(id="trend", classes="pane")
        self.minutes = SPANS_MINUTES[0]
        self.chosen = 0
        self._histories: dict[str, History] = {}

    def remember(self, snapshot: Snapshot) -> None:
        """Keeps what a snapshot says of each link, whether it is drawn or not."""
        for link in snapshot.links:
            self._histories.setdefault(link.name, History()).take(snapshot.time, link)

    def choose(self, link: int) -> None:
        """Draws another link."""
        self.chosen = link
        self.redraw()

    def change_span(self) -> None:
        """Goes to the next span, round and round."""
        place = SPANS_MINUTES.index(self.minutes) + 1
        self.minutes = SPANS_MINUTES[place % len(SPANS_MINUTES)]
        self.redraw()

    def lines_of(self, snapshot: Snapshot, space: Size) -> list[Line]:
        """Returns the graph, or why there is none."""
        if not snapshot.links:
            return [line(Piece(" No plan: no link whose voice could be drawn.", "faint"))]
        if not snapshot.tap.hearing:
            return [line(Piece(" Counters only: the voice on the link is not known.", "faint"))]
        link = snapshot.links[self.chosen % len(snapshot.links)]
        which, ways = drawn_ways(link)
        title = f" {safe(link.name, 20)}, last {self.minutes} min, {which}"
        history = self._histories.setdefault(link.name, History())
        graph = trend_lines(
            history, ways[0].budget_kbps, self.minutes, space.width, space.height - 1
        )
        return [line(Piece(title, "faint")), *graph]
