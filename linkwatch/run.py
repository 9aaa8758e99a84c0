"""Joins a tap, the monitor and the faces; owns the thread and the wall clock."""

import threading
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from linkwatch.errors import InputError, LinkwatchError, PermissionMissing
from linkwatch.frames import FrameBatch, Tap
from linkwatch.plan.planfile import Plan
from linkwatch.watch.monitor import Monitor
from linkwatch.watch.snapshot import Snapshot

SECOND_NS = 1_000_000_000
SLICE_S = 0.1  # of real time, that paced frames come in
COUNTERS_EVERY_NS = SECOND_NS // 4


@dataclass(frozen=True, slots=True)
class Source:
    """Where frames are to come from.

    Raises:
        InputError: It is not exactly one of the first three, or a figure cannot be.

    Attributes:
        tap: A port's name.
        capture: A capture file.
        scene: Whether it is the built-in scene.
        speed: Times real time, for a capture or the scene; None is as fast as it goes.
        for_s: Seconds to watch, by the time of the source; None is to its end.
    """

    tap: str | None = None
    capture: Path | None = None
    scene: bool = False
    speed: float | None = None
    for_s: float | None = None

    def __post_init__(self) -> None:
        given = (self.tap is not None) + (self.capture is not None) + self.scene
        if given != 1:
            raise InputError(
                "source",
                got=f"{given} given",
                wanted="one of --tap NIC, --capture FILE and --scene",
            )
        if self.tap is not None and self.speed is not None:
            raise InputError("--speed", got="a live port", wanted="a capture or the scene")
        for option, value in (("--speed", self.speed), ("--for", self.for_s)):
            if value is not None and not 0 < value < 1e9:
                raise InputError(option, got=f"{value:g}", wanted="a number above 0")

    @property
    def name(self) -> str:
        """What a person calls it."""
        return self.tap or (self.capture.name if self.capture else "scene")


def open_tap(source: Source, *, need_packets: bool = True) -> Tap:
    """Opens a source.

    Args:
        source: What to open.
        need_packets: Whether to fail where packets may not be read; otherwise the port's
            counters alone are watched then.

    Raises:
        PermissionMissing: Packets may not be read, and they are needed.
        LinkwatchError: The source cannot be opened.
    """
    if source.scene:
        from linkwatch.tap.scene import Scene

        return Scene()
    if source.capture is not None:
        from linkwatch.tap.capfile import CaptureFile

        return CaptureFile(source.capture)
    from linkwatch.tap.ports import open_port

    name = source.tap or ""
    try:
        return open_port(name)
    except PermissionMissing as missing:
        if need_packets:
            raise
        from linkwatch.tap.counters import CountersOnly

        return CountersOnly(name, remarks=(str(missing),))


class Watch:
    """A tap being watched against a plan.

    Args:
        tap: Where frames come from.
        monitor: Where they go.
        speed: Times real time; None is as fast as they come.
        for_s: Seconds to watch by the time of the source; None is to its end.
    """

    def __init__(
        self,
        tap: Tap,
        monitor: Monitor,
        *,
        speed: float | None = None,
        for_s: float | None = None,
    ) -> None:
        self._tap = tap
        self._monitor = monitor
        self._speed = speed
        self._for_ns = None if for_s is None else round(for_s * SECOND_NS)
        self._stopped = threading.Event()

    def stop(self) -> None:
        """Ends `snapshots`; may be called from another thread or a signal handler."""
        self._stopped.set()
        self._tap.close()

    def snapshots(self) -> Iterator[Snapshot]:
        """Yields a snapshot each tick until the source ends; closes the tap."""
        try:
            read_at, counters = 0, None
            for batch in self._limited(self._paced(self._tap.batches())):
                if batch.until - read_at >= COUNTERS_EVERY_NS or batch.until < read_at:
                    read_at, counters = batch.until, self._tap.counters()
                yield from self._monitor.feed(batch, self._tap.statistics(), counters)
            yield from self._monitor.finish(self._tap.statistics())
        finally:
            self._tap.close()

    def _limited(self, batches: Iterator[FrameBatch]) -> Iterator[FrameBatch]:
        """Yields batches until the time to watch is over."""
        end: int | None = None
        for batch in batches:
            if end is None and self._for_ns is not None:
                begin = int(batch.times[0]) if len(batch) else batch.until
                end = begin + self._for_ns
            if end is None or batch.until < end:
                yield batch
                continue
            cut = int(np.searchsorted(np.maximum.accumulate(batch.times), end))
            yield batch.part(0, cut, end)
            return

    def _paced(self, batches: Iterator[FrameBatch]) -> Iterator[FrameBatch]:
        """Yields batches as the wall clock allows, in slices so that time flows evenly."""
        if self._speed is None:
            yield from batches
            return
        slice_ns = max(1, round(SLICE_S * self._speed * SECOND_NS))
        origin: tuple[float, int] | None = None
        for batch in batches:
            for piece in sliced(batch, slice_ns):
                if origin is None:
                    origin = time.monotonic(), piece.until
                due = origin[0] + (piece.until - origin[1]) / SECOND_NS / self._speed
                if self._stopped.wait(max(0.0, due - time.monotonic())):
                    return
                yield piece


def sliced(batch: FrameBatch, slice_ns: int) -> Iterator[FrameBatch]:
    """Yields a batch in pieces that each cover at most so much time."""
    times = np.maximum.accumulate(batch.times)
    done = 0
    while done < len(batch):
        until = int(times[done]) + slice_ns
        stop = int(np.searchsorted(times, until))
        yield batch.part(done, stop, min(until, batch.until))
        done = stop
    yield batch.part(done, done, batch.until)


class ThreadedWatch:
    """A watch in a thread of its own, for a face that has a loop of its own."""

    def __init__(self, watch: Watch) -> None:
        self._watch = watch
        self._thread: threading.Thread | None = None

    def start(self, publish: Callable[[Snapshot], None], finished: Callable[[str], None]) -> None:
        """Begins to watch; both are called from the thread, `finished` once, with the reason."""

        def run() -> None:
            try:
                for snapshot in self._watch.snapshots():
                    publish(snapshot)
            except LinkwatchError as error:
                finished(str(error))
            except Exception as error:  # noqa: BLE001 - the face must say that it has stopped
                finished(f"the watch has failed: {type(error).__name__}: {error}")
            else:
                finished("end of the source")

        self._thread = threading.Thread(target=run, name="watch", daemon=True)
        self._thread.start()

    def stop(self) -> None:
        """Ends the watch and waits for it, a moment at most."""
        self._watch.stop()
        if self._thread:
            self._thread.join(timeout=2)


@dataclass(frozen=True, slots=True)
class Reading:
    """What a source held from its beginning to its end.

    Attributes:
        monitor: The monitor that has heard it all.
        packets: Frames read.
        remarks: What a reader of the figures must know.
    """

    monitor: Monitor
    packets: int
    remarks: tuple[str, ...]


def read_capture(
    path: Path, plan: Plan, *, every_s: float = 1.0, on_snapshot: Callable[[Snapshot], None]
) -> Reading:
    """Reads a capture as fast as it goes.

    Args:
        path: The capture file.
        plan: What was promised.
        every_s: Seconds between snapshots, by the frames' time.
        on_snapshot: Is given each snapshot, without its calls.
    """
    tap = open_tap(Source(capture=path))
    monitor = Monitor(plan, tap.name, every_s=every_s, keep_all=True, with_calls=False)
    for snapshot in Watch(tap, monitor).snapshots():
        on_snapshot(snapshot)
    statistics = tap.statistics()
    return Reading(monitor, statistics.frames, statistics.remarks)
