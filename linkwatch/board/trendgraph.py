"""The trend as lines: voice used and reserved against the budget, on a scale that stays."""

from collections.abc import Sequence
from math import isfinite

from linkwatch.board.history import History
from linkwatch.board.lines import Line, Piece, joined, line
from linkwatch.board.text import kbps
from linkwatch.watch.snapshot import LinkState

EIGHTHS = " ▁▂▃▄▅▆▇█"
RESERVED, BEYOND, LIMIT = "░", "▓", "╌"
AXIS_CELLS = 9
HEADROOM = 1.2  # above the budget, so that what is over it can be seen
LEAST_ROWS = 3


def scale_top(budget_kbps: float | None, peak_kbps: float) -> float:
    """Returns the upper end of the scale: it does not move while the peak stays below it."""
    top = max((budget_kbps or 0.0) * HEADROOM, 1.0)
    while top < peak_kbps and isfinite(peak_kbps):
        top *= 1.5
    return top


def trend_lines(
    history: History, link: LinkState, minutes: int, width: int, rows: int
) -> list[Line]:
    """Returns the graph of a link's last minutes in a space of cells and rows."""
    graph_rows = rows - 1
    if graph_rows < LEAST_ROWS or width <= AXIS_CELLS + 10:
        return [line(Piece("too little space for the trend", "faint"))]
    each, columns = history.columns(minutes, width - AXIS_CELLS)
    limits = [way.budget_kbps for way in (link.to_site, link.from_site)]
    budget = min((limit for limit in limits if limit is not None), default=None)
    peak = max((max(column) for column in columns if column), default=0.0)
    top = scale_top(budget, peak)
    limit_row = int(budget / top * graph_rows) if budget else None
    shown: list[Line] = [
        _axis(row, graph_rows, top, budget, limit_row)
        + _row(columns, row, top / graph_rows, limit_row)
        for row in reversed(range(graph_rows))
    ]
    shown.append(_foot(minutes, each, len(columns)))
    return shown


def _axis(row: int, rows: int, top: float, budget: float | None, limit_row: int | None) -> Line:
    if budget is not None and row == limit_row:
        return line(Piece(f"{kbps(budget)} ", "strong"), Piece("┤", "faint"))
    label = kbps(top) if row == rows - 1 else ""
    return line(Piece(f"{label:>7} │", "faint"))


def _row(
    columns: Sequence[tuple[float, float] | None], row: int, per_row: float, limit_row: int | None
) -> Line:
    """Returns one row of the graph."""
    return joined(_cell(column, row, per_row, limit_row) for column in columns)


def _cell(
    column: tuple[float, float] | None, row: int, per_row: float, limit_row: int | None
) -> Piece:
    """Returns one cell: used before reserved before the budget's line."""
    used, reserved = column or (0.0, 0.0)
    eighths = round((used / per_row - row) * 8) if isfinite(used) else 0
    beyond = limit_row is not None and row > limit_row
    if eighths >= len(EIGHTHS) - 1:
        return Piece(BEYOND, "alarm") if beyond else Piece(EIGHTHS[-1], "accent")
    if eighths > 0:
        return Piece(EIGHTHS[eighths], "alarm" if beyond else "accent")
    if isfinite(reserved) and reserved / per_row > row + 0.5:
        return Piece(RESERVED, "alarm" if beyond else "second")
    return Piece(LIMIT, "warn") if row == limit_row else Piece(" ")


def _foot(minutes: int, each: int, columns: int) -> Line:
    first = f"-{minutes} min"
    middle = f"█ used  ░ reserved  ╌ budget, kbit/s; {each} s each"
    room = columns - len(first) - len("now")
    if len(middle) + 4 > room:
        middle = "█ used ░ reserved" if room > 22 else ""
    return line(" " * (AXIS_CELLS - 1), Piece(f"└{first}{middle:^{max(room - 1, 0)}}now", "faint"))
