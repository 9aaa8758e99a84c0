"""The worst alarm that stands, in one line that is always in its place."""

from textual.geometry import Size

from linkwatch.board.lines import Line, Piece, fitted, line, width
from linkwatch.board.text import SIGNS, TONES, alarm_words, clock, safe
from linkwatch.board.widgets.sheet import Sheet
from linkwatch.watch.snapshot import Snapshot


def banner_line(snapshot: Snapshot, cells: int) -> Line:
    """Returns the line: sign, severity, kind, subject and text of the worst alarm."""
    if not snapshot.alarms:
        return fitted(line(Piece(" ·   no alarm stands", "faint")), cells)
    worst = snapshot.alarms[0]
    tone = TONES[worst.severity]
    words = f" {SIGNS[worst.severity]} {worst.severity} {worst.kind}  "
    words += f"{safe(alarm_words(worst), 30)}: {safe(worst.text, cells)}"
    more = f"  since {clock(worst.raised)}"
    if len(snapshot.alarms) > 1:
        more = f"  +{len(snapshot.alarms) - 1} more"
    right = line(Piece(f"{more} ", tone))
    return (*fitted(line(Piece(words, tone)), cells - width(right)), *right)


class Banner(Sheet, can_focus=False):
    """The line of the worst alarm."""

    def __init__(self) -> None:
        super().__init__(id="banner")

    def lines_of(self, snapshot: Snapshot, space: Size) -> list[Line]:
        """Returns the one line."""
        worst = snapshot.alarms[0].severity if snapshot.alarms else None
        self.set_class(worst is not None and TONES[worst] == "alarm", "-alarm")
        self.set_class(worst is not None and TONES[worst] == "warn", "-warn")
        return [banner_line(snapshot, space.width)]
