"""The columns of the calls table: what each shows, and which go first when space is short."""

from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

from rich.cells import cell_len

from linkwatch.board.lines import Line, Piece, joined
from linkwatch.board.text import decimal, duration, padded, safe
from linkwatch.plan.marking import marking_name
from linkwatch.watch.snapshot import CallState

ARROW = " → "
ENDS_LEAST = 2 * 15 + len(ARROW)  # two IPv4 addresses without their ports
ENDS_MOST = 2 * 30 + len(ARROW)
SIGN = "!"


@dataclass(frozen=True, slots=True)
class Row:
    """A call as the table shows it.

    Attributes:
        call: The call.
        now: The snapshot's time, nanoseconds.
        alarmed: Whether an alarm stands on it.
    """

    call: CallState
    now: int
    alarmed: bool

    @property
    def state(self) -> str:
        """The call's state in a word, its trouble first."""
        call = self.call
        if not call.up:
            return "ended"
        if not call.both_ways:
            return "one-way"
        if call.crosses and not call.as_planned:
            return "unplanned"
        if call.crosses and not call.marking_right:
            return "marking"
        if self.alarmed:
            return "poor"
        return "up" if call.crosses else "elsewhere"

    @property
    def troubled(self) -> bool:
        """Whether somebody should look at it."""
        return self.state not in ("up", "ended", "elsewhere")


@dataclass(frozen=True, slots=True)
class Column:
    """A column.

    Attributes:
        title: Its heading.
        width: Its cells.
        text: What it shows of a row; None for the two ends, which take the width that is left.
        right: Whether it stands on the right edge.
        going: When it goes as space gets short: 1 is first, 0 never.
    """

    title: str
    width: int
    text: Callable[[Row], str] | None
    right: bool = True
    going: int = 0


def _flagged(text: str, *, wrong: bool) -> str:
    return text + SIGN if wrong else text


def _age(row: Row) -> str:
    end = row.now if row.call.up else row.call.end
    return duration(end - row.call.start)


COLUMNS = (
    Column("", 1, lambda row: SIGN if row.troubled else " "),
    Column("call", 5, lambda row: str(row.call.id), going=8),
    Column("here → there", 0, None, right=False),
    Column(
        "codec",
        8,
        lambda row: _flagged(
            safe(row.call.codec, 7), wrong=bool(row.call.crosses) and not row.call.as_planned
        ),
        right=False,
    ),
    Column("ms", 4, lambda row: decimal(row.call.packet_ms, 4, 0), going=4),
    Column("kbit/s", 6, lambda row: decimal(row.call.used_kbps, 6)),
    Column("reserved", 8, lambda row: decimal(row.call.reserved_kbps, 8), going=2),
    Column("loss", 4, lambda row: decimal(row.call.loss_percent, 4), going=7),
    Column("jitter", 6, lambda row: decimal(row.call.jitter_ms, 6), going=6),
    Column("MOS", 4, lambda row: decimal(row.call.mos, 4, 2), going=1),
    Column(
        "mark",
        5,
        lambda row: _flagged(
            marking_name(row.call.dscp), wrong=bool(row.call.crosses) and not row.call.marking_right
        ),
        right=False,
        going=5,
    ),
    Column("age", 7, _age, going=3),
    Column("state", 9, lambda row: row.state, right=False),
)


@lru_cache(maxsize=64)
def columns_for(width: int) -> tuple[tuple[Column, ...], int]:
    """Returns the columns that find space in `width` cells, and the cells left for the two ends.

    They go in the order of `Column.going`; what never goes is the sign, the ends, the codec, the
    cost on the link and the state.
    """
    columns = list(COLUMNS)
    order = sorted((column for column in COLUMNS if column.going), key=lambda c: c.going)
    while True:
        left = width - sum(column.width + 1 for column in columns) + 1
        if left >= ENDS_LEAST or not order:
            return tuple(columns), max(min(left, ENDS_MOST), len(ARROW) + 2)
        columns.remove(order.pop(0))


def ends(call: CallState, width: int) -> str:
    """Returns both ends of a call in `width` cells; ports go before addresses are cut."""
    each = (width - len(ARROW)) // 2
    return padded(_end(call.here, each) + ARROW + _end(call.there, each).rstrip(), width)


def _end(end: str, width: int) -> str:
    if cell_len(end) > width:
        end = end.rpartition(":")[0].strip("[]") or end
    return padded(end, width)


@lru_cache(maxsize=64)
def head_line(width: int) -> Line:
    """Returns the table's heading."""
    columns, left = columns_for(width)
    cells = (padded(c.title, c.width or left, right=c.right) for c in columns)
    return (Piece(" ".join(cells), "second"),)


def call_line(row: Row, width: int) -> Line:
    """Returns one call's line; trouble colours the sign and what it is about."""
    columns, left = columns_for(width)
    call = row.call
    tone = "plain" if call.up and call.crosses else "faint"
    shown: list[Piece] = []
    gap = ""
    for column in columns:
        text = column.text(row) if column.text else ends(call, left)
        judged = text.endswith(SIGN) or (column.title == "state" and row.troubled)
        cell = padded(text, column.width or left, right=column.right)
        shown.append(Piece(gap + cell, "alarm" if judged and call.up else tone))
        gap = " "
    return joined(shown)
