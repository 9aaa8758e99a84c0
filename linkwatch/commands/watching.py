"""The commands that watch a source: read, log, count, and the dashboard."""

import json
import signal
import sys
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

from linkwatch.errors import InputError
from linkwatch.plan.planfile import Plan, default_plan, load_plan, parse_plan
from linkwatch.record import export, text
from linkwatch.run import Source, ThreadedWatch, Watch, open_tap, read_capture
from linkwatch.tap.rights import hidden_from_caller
from linkwatch.watch.monitor import Monitor
from linkwatch.watch.snapshot import Snapshot

Out = Callable[[str], None]


def say(line: str) -> None:
    """Prints a line at once, for whoever reads along."""
    print(line, flush=True)


COUNT_S = 5.0  # long enough for every call to have shown itself

CAUTIONS = (
    "Reading call traffic may need the consent of those who speak, or authority under local law.",
    "The figures are an aid and no guarantee: measure, and leave a margin.",
    (
        "A limit must never refuse an emergency call: keep a reserve, and design emergency access "
        "by local codes and licensed practice."
    ),
)


def plan_for(path: Path | None, source: Source) -> Plan:
    """Returns the plan a person names, the scene's own, or the one that promises nothing."""
    if path is not None:
        return load_plan(path)
    if source.scene:
        from linkwatch.tap.scene import scene_plan_text

        return parse_plan(scene_plan_text(), "the scene's plan")
    return default_plan()


def read(
    source: Source,
    plan: Path | None,
    *,
    every_s: float,
    as_json: bool,
    judge: bool,
    out: Out = say,
) -> int:
    """Reads a capture and prints what it held; returns the exit status."""
    last: list[Snapshot] = []
    kept: list[dict[str, Any]] = []

    def keep(snapshot: Snapshot) -> None:
        last[:] = [snapshot]
        if as_json:
            kept.append(export.snapshot_json(snapshot))

    path = source.capture or Path()
    reading = read_capture(path, plan_for(plan, source), every_s=every_s, on_snapshot=keep)
    monitor = reading.monitor
    calls, most, alarms = monitor.calls(), monitor.most_calls(), monitor.alarms()
    if as_json:
        answer = export.reading_json(
            reading.packets, monitor.streams(), calls, most, alarms, kept, reading.remarks
        )
        out(json.dumps(answer))
    else:
        final = last[0] if last else None
        out(
            text.reading_text(
                path.name, reading.packets, final, calls, most, alarms, reading.remarks
            )
        )
    return 1 if judge and alarms else 0


def log(
    source: Source, plan: Path | None, *, every_s: float, as_json: bool, judge: bool, out: Out = say
) -> int:
    """Prints a line for each snapshot until the source ends; returns the exit status."""
    bad = False
    for snapshot in _snapshots(source, plan_for(plan, source), every_s):
        line = json.dumps(export.snapshot_json(snapshot)) if as_json else text.log_line(snapshot)
        out(line)
        bad = bad or bool(snapshot.alarms)
    return 1 if judge and bad else 0


def count(source: Source, plan: Path | None, *, as_json: bool, judge: bool, out: Out = say) -> int:
    """Prints how many calls are up when the time to listen is over; returns the exit status."""
    last = None
    for snapshot in _snapshots(source, plan_for(plan, source), every_s=1.0):
        last = snapshot
    if last is None:
        raise InputError(source.name, got="no frame at all", remedy="Listen longer, with --for.")
    out(json.dumps(export.count_json(last)) if as_json else text.count_text(last))
    return 1 if judge and last.alarms else 0


def board(
    source: Source, plan: Path | None, *, every_s: float = 1.0, need_packets: bool = False
) -> int:
    """Opens the dashboard on a source; returns the exit status."""
    if not (sys.stdin.isatty() and sys.stdout.isatty()):
        raise InputError(
            "the dashboard",
            got="no terminal",
            remedy="Start it in a terminal, or use `linkwatch log` instead.",
        )
    # All this comes before the port is opened, since root is given up with that.
    if source.tap and (hidden := hidden_from_caller()):
        raise InputError(
            "the dashboard",
            got=f"{hidden} cannot be read by the user who called sudo",
            remedy="Install Linkwatch where that user may read it: root is given up once it runs.",
        )
    promised = plan_for(plan, source)
    from linkwatch.board.app import Board
    from linkwatch.tap.counters import CountersOnly

    tap = open_tap(source, need_packets=need_packets)
    hearing = not isinstance(tap, CountersOnly)
    monitor = Monitor(promised, tap.name, every_s=every_s, hearing=hearing)
    watch = Watch(tap, monitor, speed=source.speed, for_s=source.for_s)
    app = Board(f"{promised.site} - {tap.name}", ThreadedWatch(watch), CAUTIONS)
    app.run()
    return app.return_code or 0


def _snapshots(source: Source, plan: Plan, every_s: float) -> Iterator[Snapshot]:
    """Yields the snapshots of a source; one that is interrupted still has its last one.

    Raises:
        KeyboardInterrupt: It was interrupted from the keyboard, after the last snapshot.
    """
    tap = open_tap(source)
    monitor = Monitor(plan, tap.name, every_s=every_s, with_calls=False)
    watch = Watch(tap, monitor, speed=source.speed, for_s=source.for_s)
    came: list[int] = []

    def stop(number: int, _frame: object) -> None:
        came.append(number)
        watch.stop()

    before = {number: signal.signal(number, stop) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield from watch.snapshots()
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
    if signal.SIGINT in came:
        raise KeyboardInterrupt
