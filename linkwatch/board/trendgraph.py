"""The trend as lines: voice used and reserved against the budget, on a scale that stays.

Used is drawn in blocks, in ▓ where it is over the budget; reserved in ░ above it.
"""

from dataclasses import dataclass
from math import isfinite

from linkwatch.board.history import History
from linkwatch.board.lines import Line, Piece, joined, line
from linkwatch.board.text import kbps

EIGHTHS = " ▁▂▃▄▅▆▇█"
RESERVED, BEYOND, LIMIT = "░", "▓", "╌"
AXIS_CELLS = 9
HEADROOM = 1.2  # above the budget, so that what is over it can be seen
LEAST_ROWS, LEAST_COLUMNS = 3, 10


def scale_top(budget_kbps: float | None, peak_kbps: float) -> float:
    """Returns the upper end of the scale: it does not move while the peak stays below it."""
    top = max((budget_kbps or 0.0) * HEADROOM, 1.0)
    while top < peak_kbps and isfinite(peak_kbps):
        top *= 1.5
    return top


@dataclass(frozen=True, slots=True)
class Ground:
    """What a graph is drawn on.

    Attributes:
        rows: Its rows.
        top: The upper end of the scale, kbit/s.
        budget: The budget, kbit/s, or None without one.
    """

    rows: int
    top: float
    budget: float | None

    @property
    def per_row(self) -> float:
        """What a row stands for, kbit/s."""
        return self.top / self.rows

    @property
    def limit_row(self) -> int | None:
        """The row of the budget, 0 at the bottom."""
        return int(self.budget / self.per_row) if self.budget is not None else None

    def is_beyond(self, rate_kbps: float, row: int) -> bool:
        """Whether a rate is over the budget, and a row shows it."""
        if self.budget is None or self.limit_row is None:
            return False
        return rate_kbps > self.budget and row >= self.limit_row


def trend_lines(
    history: History, budget: float | None, minutes: int, width: int, rows: int
) -> list[Line]:
    """Returns the graph of the last minutes in a space of cells and rows.

    Args:
        history: What is drawn.
        budget: The budget it is held against, kbit/s, or None without one.
        minutes: How many minutes.
        width: Cells, the axis among them.
        rows: Rows, the foot among them.
    """
    if rows <= LEAST_ROWS or width <= AXIS_CELLS + LEAST_COLUMNS:
        return [line(Piece("too little space for the trend", "faint"))]
    each, columns = history.columns(minutes, width - AXIS_CELLS)
    peak = max((max(column) for column in columns if column), default=0.0)
    ground = Ground(rows - 1, scale_top(budget, peak), budget)
    shown: list[Line] = [
        _axis(row, ground) + joined(_cell(column, row, ground) for column in columns)
        for row in reversed(range(ground.rows))
    ]
    shown.append(_foot(minutes, each, len(columns)))
    return shown


def _axis(row: int, ground: Ground) -> Line:
    if row == ground.limit_row:
        return line(Piece(f"{kbps(ground.budget)} ", "strong"), Piece("┤", "faint"))
    label = kbps(ground.top) if row == ground.rows - 1 else ""
    return line(Piece(f"{label:>7} │", "faint"))


def _cell(column: tuple[float, float] | None, row: int, ground: Ground) -> Piece:
    """Returns one cell: what is used lies before what is reserved, and both before the limit."""
    used, reserved = column or (0.0, 0.0)
    eighths = round((used / ground.per_row - row) * 8) if isfinite(used) else 0
    if eighths > 0:
        if ground.is_beyond(used, row):
            return Piece(BEYOND, "alarm")
        return Piece(EIGHTHS[min(eighths, len(EIGHTHS) - 1)], "accent")
    if isfinite(reserved) and reserved / ground.per_row > row + 0.5:
        return Piece(RESERVED, "alarm" if ground.is_beyond(reserved, row) else "second")
    return Piece(LIMIT, "warn") if row == ground.limit_row else Piece(" ")


def _foot(minutes: int, each: int, columns: int) -> Line:
    first = f"-{minutes} min"
    middle = f"█ used  ░ reserved  ╌ budget, kbit/s; {each} s each"
    room = columns - len(first) - len("now")
    if len(middle) + 4 > room:
        middle = "█ used ░ reserved" if room > 22 else ""
    return line(" " * (AXIS_CELLS - 1), Piece(f"└{first}{middle:^{max(room - 1, 0)}}now", "faint"))
