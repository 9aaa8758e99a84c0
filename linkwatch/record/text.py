"""Snapshots and readings as text for people."""

from collections.abc import Sequence
from datetime import datetime

from linkwatch.errors import one_line
from linkwatch.plan.marking import marking_name
from linkwatch.watch.snapshot import Alarm, CallState, DirectionState, LinkState, Snapshot


def clock(time: int) -> str:
    """Returns a time of day, local."""
    return datetime.fromtimestamp(time / 1e9).astimezone().strftime("%H:%M:%S")


def log_line(snapshot: Snapshot) -> str:
    """Returns a snapshot in one line."""
    parts = [clock(snapshot.time), f"{snapshot.calls_up:3d} calls"]
    parts += [
        f"{link.name}: to site {_used(link.to_site)}, from site {_used(link.from_site)}"
        for link in snapshot.links
    ]
    if snapshot.alarms:
        parts.append("! " + ", ".join(dict.fromkeys(str(a.kind) for a in snapshot.alarms)))
    return "  ".join(parts)


def _used(direction: DirectionState) -> str:
    of = "" if direction.budget_kbps is None else f"/{direction.budget_kbps:.0f}"
    return f"{direction.used_kbps:.0f}{of} kbit/s"


def count_text(snapshot: Snapshot) -> str:
    """Returns how many calls are up, in a sentence a link."""
    lines = [f"{_calls(snapshot.calls_up)} up at {clock(snapshot.time)}"]
    lines += [f"  {_link(link)}" for link in snapshot.links]
    if snapshot.elsewhere_up:
        lines.append(f"  {_calls(snapshot.elsewhere_up)} besides that cross no link of the plan")
    return "\n".join(lines)


def _calls(number: int) -> str:
    return "1 call" if number == 1 else f"{number} calls"


def _link(link: LinkState) -> str:
    up = max(link.to_site.calls, link.from_site.calls)
    planned = "" if link.planned_calls is None else f" of {link.planned_calls} planned"
    rooms = [d.room_calls for d in (link.to_site, link.from_site) if d.room_calls is not None]
    room = f", room for {min(rooms)} more" if rooms else ", no limit planned"
    reserve = f" beside the reserve of {link.reserve_calls}" if rooms and link.reserve_calls else ""
    return f"{link.name}: {_calls(up)}{planned}{room}{reserve}"


def reading_text(
    name: str,
    packets: int,
    last: Snapshot | None,
    calls: Sequence[CallState],
    most: tuple[int, int],
    alarms: Sequence[Alarm],
    remarks: Sequence[str],
) -> str:
    """Returns what a capture held: its calls, its alarms and what the figures do not cover."""
    conversations = len({call.conversation for call in calls})
    in_all = "1 conversation" if conversations == 1 else f"{conversations} conversations"
    held = f"{_calls(len(calls))} in {in_all}, {most[0]} at once at most"
    lines = [f"{one_line(name)}: {packets} frames, {held}"]
    if last:
        lines += [f"  {_framed(link)}" for link in last.links]
        if not all(link.directions_known for link in last.links):
            lines.append("  no site prefixes given: every stream counts, directions are a guess")
    if calls:
        lines += ["", _HEAD, *(_call(call) for call in calls)]
    if alarms:
        lines += ["", "alarms", *(_alarm(alarm) for alarm in alarms)]
    lines += [f"note: {one_line(remark)}" for remark in remarks]
    return "\n".join(lines)


def _framed(link: LinkState) -> str:
    return f"{link.name}: {link.framing}; {link.planned_call} costs {link.call_kbps:.1f} kbit/s"


_HEAD = " call  start     seconds  codec      ms   kbit/s  loss %  jitter  mark  ends\n" + "-" * 79


def _call(call: CallState) -> str:
    ms = f"{call.packet_ms:g}" if call.packet_ms else "?"
    jitter = "?" if call.jitter_ms is None else f"{call.jitter_ms:.1f}"
    ways = "" if call.both_ways else "  one way"
    return (
        f"{call.id:5d}  {clock(call.start)}  {(call.end - call.start) / 1e9:7.1f}  "
        f"{call.codec:9s} {ms:>4s}  {call.used_kbps:7.1f}  {call.loss_percent:6.2f}  "
        f"{jitter:>6s}  {marking_name(call.dscp):4s}  {call.here} - {call.there}{ways}"
    )


def _alarm(alarm: Alarm) -> str:
    until = f" to {clock(alarm.cleared)}" if alarm.cleared else ", stands"
    link = f"{alarm.link} " if alarm.link else ""
    return (
        f"  {clock(alarm.raised)}{until}  {alarm.severity} {alarm.kind}: {link}{alarm.subject}: "
        f"{alarm.text}"
    )
