"""How well the tap hears."""

from textual.geometry import Size

from linkwatch.board.lines import Line, Piece, labelled, line
from linkwatch.board.text import safe, wrapped
from linkwatch.board.widgets.sheet import Sheet
from linkwatch.watch.snapshot import Snapshot


def tap_lines(snapshot: Snapshot, width: int) -> list[Line]:
    """Returns what the tap has heard, lost and must be known of it."""
    tap = snapshot.tap
    hears = ("yes", "good") if tap.hearing else ("no, counters only", "warn")
    dropped = f"{tap.dropped:>12,}"
    shown = [
        labelled(" tap", safe(tap.name, max(4, width - 16)), "strong"),
        labelled(" hears packets", *hears),
        labelled(" frames", f"{tap.packets:>12,}"),
        labelled(
            " dropped",
            dropped + ("  ! figures are too low" if tap.dropped else ""),
            "warn" if tap.dropped else "plain",
        ),
        labelled(" voice packets", f"{tap.voice_packets:>12,}"),
        labelled(" streams", f"{tap.streams:>12,}"),
    ]
    guessed = [
        f"the plan names no site_prefixes for link {link.name}: every stream counts for it, and "
        "which direction is which is guessed"
        for link in snapshot.links
        if not link.directions_known
    ]
    for remark in (*tap.remarks, *guessed):
        first, *others = wrapped(remark, width - 4)
        shown += [line(Piece(" · ", "warn"), first)]
        shown += [line(f"   {row}") for row in others]
    return shown


class TapPane(Sheet, can_focus=True):
    """The tap's health."""

    def __init__(self) -> None:
        super().__init__(id="tap", classes="pane")

    def lines_of(self, snapshot: Snapshot, space: Size) -> list[Line]:
        """Returns the tap's health as lines."""
        return tap_lines(snapshot, space.width)
