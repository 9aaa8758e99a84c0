"""One call with everything that is known of its two streams, side by side."""

from collections.abc import Callable

from linkwatch.board.callcolumns import Row
from linkwatch.board.lines import BLANK, Line, Piece, heading, line
from linkwatch.board.text import NOTHING, clock, decimal, duration, padded, safe, wrapped
from linkwatch.board.widgets.calls import alarmed_calls
from linkwatch.plan.marking import marking_name
from linkwatch.watch.snapshot import CallState, Snapshot, StreamState

LABEL_CELLS = 17

Figure = tuple[str, Callable[[StreamState], str]]

WHO: tuple[Figure, ...] = (
    ("source", lambda s: s.source),
    ("destination", lambda s: s.destination),
    ("SSRC", lambda s: f"{s.ssrc:#010x}"),
    ("sends now", lambda s: "yes" if s.active else "no"),
    ("first packet", lambda s: clock(s.first)),
    ("last packet", lambda s: clock(s.last)),
)
SPEECH: tuple[Figure, ...] = (
    ("codec", lambda s: f"{s.codec}, by {s.codec_evidence}"),
    ("payload type", lambda s: f"{s.payload_type}, {s.media}"),
    ("packetisation", lambda s: f"{s.packet_ms:g} ms" if s.packet_ms else NOTHING),
    ("marking", lambda s: marking_name(s.dscp) + ("" if s.dscp_steady else ", not steady")),
)
PACKETS: tuple[Figure, ...] = (
    ("received", lambda s: f"{s.packets:,}"),
    ("expected", lambda s: f"{s.expected:,}"),
    ("lost", lambda s: f"{s.lost:,}  {s.loss_percent:.2f} %"),
    ("lost, RFC 3550", lambda s: f"{s.lost_a3:,}"),
    ("duplicates", lambda s: f"{s.duplicates:,}"),
    ("out of order", lambda s: f"{s.reordered:,}"),
)
TIMING: tuple[Figure, ...] = (
    ("jitter now", lambda s: f"{decimal(s.jitter_ms, 8)} ms"),
    ("jitter mean", lambda s: f"{decimal(s.jitter_mean_ms, 8)} ms"),
    ("jitter highest", lambda s: f"{decimal(s.jitter_max_ms, 8)} ms"),
)
COST: tuple[Figure, ...] = (
    ("on the link", lambda s: f"{s.link_kbps:.1f} kbit/s"),
    ("link octets", lambda s: f"{s.link_octets:,.0f}"),
    ("IP octets", lambda s: f"{s.ip_octets:,}"),
)
SECTIONS = (
    ("who", WHO),
    ("speech", SPEECH),
    ("packets", PACKETS),
    ("timing", TIMING),
    ("cost", COST),
)


def both_streams(call: CallState) -> tuple[StreamState | None, StreamState | None]:
    """Returns the streams from here to there and from there to here, the latest of each."""
    latest = sorted(call.streams, key=lambda stream: stream.last)
    out = [stream for stream in latest if stream.source == call.here]
    back = [stream for stream in latest if stream.source != call.here]
    return (out[-1] if out else None), (back[-1] if back else None)


def call_lines(snapshot: Snapshot, call: CallState, width: int) -> list[Line]:
    """Returns a call's page in a width of cells."""
    each = max(10, (width - LABEL_CELLS - 3) // 2)
    row = Row(call, snapshot.time, str(call.id) in alarmed_calls(snapshot.alarms))
    shown = _head(row, width)
    shown += _alarms(snapshot, call, width)
    out, back = both_streams(call)
    shown.append(
        line(
            " " * (LABEL_CELLS + 1),
            _title("here → there", out, each),
            "  ",
            _title("there → here", back, each),
        )
    )
    for title, figures in SECTIONS:
        shown.append(heading(f" {title}", width))
        for label, figure in figures:
            shown.append(
                line(
                    Piece(" " + padded(label, LABEL_CELLS), "faint"),
                    _cell(out, figure, each),
                    "  ",
                    _cell(back, figure, each),
                )
            )
    return shown


def _title(way: str, stream: StreamState | None, cells: int) -> Piece:
    if stream is None:
        return Piece(padded(f"{way}  ! nothing heard", cells), "alarm")
    return Piece(padded(way, cells), "strong")


def _cell(stream: StreamState | None, figure: Callable[[StreamState], str], cells: int) -> Piece:
    if stream is None:
        return Piece(padded(NOTHING, cells), "faint")
    return Piece(padded(figure(stream), cells), "plain" if stream.active else "faint")


def _head(row: Row, width: int) -> list[Line]:
    call = row.call
    tone = "alarm" if row.troubled else "good" if call.up else "faint"
    leg = "" if call.conversation == call.id else f"  a leg of call {call.conversation}"
    links = ", ".join(safe(name, 20) for name in call.crosses) or "no link of the plan"
    lasted = duration((row.now if call.up else call.end) - call.start).strip()
    return [
        line(
            Piece(f" Call {call.id}", "strong"),
            Piece(f"  {'! ' if row.troubled else ''}{row.state}", tone),
            Piece(f"  since {clock(call.start)}, {lasted}  over {links}{leg}", "faint"),
        ),
        line(f" {padded(call.here, 26).rstrip()} ↔ {safe(call.there, max(10, width - 30))}"),
        line(
            Piece(" reserved ", "faint"),
            decimal(call.reserved_kbps, 7),
            Piece("  used ", "faint"),
            decimal(call.used_kbps, 7),
            Piece(" kbit/s", "faint"),
            Piece("  MOS ", "faint"),
            decimal(call.mos, 4, 2),
            Piece("" if call.as_planned or not call.crosses else "  codec not as planned", "warn"),
            Piece("" if call.marking_right or not call.crosses else "  marking wrong", "warn"),
        ),
    ]


def _alarms(snapshot: Snapshot, call: CallState, width: int) -> list[Line]:
    """Returns what stands against this call."""
    shown: list[Line] = []
    for alarm in snapshot.alarms:
        if alarmed_calls((alarm,)) == {str(call.id)}:
            rows = wrapped(alarm.text, width - 4, 2)
            shown += [
                line(Piece(f" {'!' if row is rows[0] else ' '} {row}", "warn")) for row in rows
            ]
    return [*shown, BLANK]
