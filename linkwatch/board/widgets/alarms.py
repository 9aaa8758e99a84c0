"""The alarms that stand, and below them those that were cleared a short while ago."""

from textual.geometry import Size

from linkwatch.board.lines import BLANK, Line, Piece, heading, line
from linkwatch.board.text import SIGNS, TONES, alarm_words, clock, duration, safe, wrapped
from linkwatch.board.widgets.sheet import Sheet
from linkwatch.watch.snapshot import Alarm, Snapshot

INDENT = 5
MOST_SHOWN = 200  # of each sort; the log has them all


def alarm_lines(snapshot: Snapshot, width: int) -> list[Line]:
    """Returns the alarms as lines, worst first, then the cleared ones, latest first."""
    shown: list[Line] = []
    if not snapshot.alarms:
        shown.append(line(Piece(" no alarm stands", "faint")))
    for alarm in snapshot.alarms[:MOST_SHOWN]:
        shown += _standing(alarm, snapshot.time, width)
    if len(snapshot.alarms) > MOST_SHOWN:
        shown.append(line(Piece(f" and {len(snapshot.alarms) - MOST_SHOWN} more", "faint")))
    if snapshot.cleared:
        shown += [BLANK, heading(f" cleared lately: {len(snapshot.cleared)}", width)]
        shown += [_cleared(alarm, width) for alarm in snapshot.cleared[:MOST_SHOWN]]
    return shown


def _standing(alarm: Alarm, now: int, width: int) -> list[Line]:
    tone = TONES[alarm.severity]
    since = f"since {clock(alarm.raised)}, {duration(now - alarm.raised).strip()}"
    head = f" {SIGNS[alarm.severity]} {alarm.severity} {alarm.kind}"
    subject = safe(alarm_words(alarm), max(10, width - INDENT))
    if len(head) + len(subject) + len(since) + 5 <= width:
        top = [line(Piece(head, tone), f"  {subject}", Piece(f"  {since}", "faint"))]
    else:
        top = [
            line(Piece(head, tone), Piece(f"  {clock(alarm.raised)}", "faint")),
            line(" " * INDENT, subject),
        ]
    text = wrapped(alarm.text, width - INDENT - 1)
    return [*top, *(line(Piece(" " * INDENT + row, "plain")) for row in text)]


def _cleared(alarm: Alarm, width: int) -> Line:
    text = f"     {clock(alarm.raised)} to {clock(alarm.cleared)}  {alarm.kind}  "
    return line(Piece(safe(text + alarm_words(alarm), width), "faint"))


class Alarms(Sheet, can_focus=True):
    """The alarms."""

    def __init__(self) -> None:
        super().__init__(id="alarms", classes="pane")

    def lines_of(self, snapshot: Snapshot, space: Size) -> list[Line]:
        """Returns the alarms as lines."""
        return alarm_lines(snapshot, space.width)
