"""Joining tap, monitor and faces: pace, limits, threads and the ways a source can end."""

import threading

import pytest
from hypothesis import given
from hypothesis import strategies as st
from wirebuild import START_NS, batch, both_ways, speech

from linkwatch.errors import CaptureError, InputError, PermissionMissing
from linkwatch.frames import LinkType, TapStatistics, silence
from linkwatch.plan.planfile import default_plan
from linkwatch.run import Source, ThreadedWatch, Watch, open_tap, sliced
from linkwatch.tap.counters import CountersOnly
from linkwatch.watch.monitor import Monitor

SECOND = 10**9


class Frames:
    """A tap of prepared batches."""

    name = "frames"

    def __init__(self, *batches, error=None):
        self._batches, self._error = batches, error
        self.closed = threading.Event()

    def batches(self):
        for prepared in self._batches:
            if self.closed.is_set():
                return
            yield prepared
        if self._error:
            raise self._error

    def counters(self):
        return None

    def statistics(self):
        return TapStatistics()

    def close(self):
        self.closed.set()


def watch_on(tap, **options):
    return Watch(tap, Monitor(default_plan(), tap.name), **options)


def test_a_source_is_exactly_one_thing():
    """None, or two, of port, capture and scene is an error that lists them."""
    for wrong in ({}, {"tap": "eth0", "scene": True}):
        with pytest.raises(InputError, match="--tap NIC, --capture FILE and --scene"):
            Source(**wrong)


@pytest.mark.parametrize("speed", [0, -1, float("nan"), float("inf")])
def test_a_speed_that_cannot_be_is_refused(speed):
    """Only a number above 0 is a speed."""
    with pytest.raises(InputError, match="--speed"):
        Source(scene=True, speed=speed)


def test_a_live_port_has_no_speed():
    """Real time runs at its own pace."""
    with pytest.raises(InputError, match="--speed"):
        Source(tap="lo", speed=2)


def test_without_the_right_to_read_there_are_still_the_counters(monkeypatch):
    """Where packets are not needed, a port's counters are watched, with the reason as a remark."""

    def refused(name):
        raise PermissionMissing(name, got="packets may not be read here", remedy="Use sudo.")

    monkeypatch.setattr("linkwatch.tap.ports.open_port", refused)
    with pytest.raises(PermissionMissing):
        open_tap(Source(tap="lo"))
    tap = open_tap(Source(tap="lo"), need_packets=False)
    assert isinstance(tap, CountersOnly)
    assert "Use sudo." in tap.statistics().remarks[0]


def test_for_counts_the_time_of_the_source():
    """Ten seconds of frames watched for three: three seconds of them are heard."""
    tap = Frames(batch(both_ways(packets=500)))
    snapshots = list(watch_on(tap, for_s=3).snapshots())
    assert snapshots[-1].time == START_NS + 3 * SECOND
    assert snapshots[-1].tap.voice_packets == 2 * 150
    assert tap.closed.is_set()


def test_a_silent_source_ends_in_time_too():
    """Time passes on a silent port, and so does the time to watch."""
    tap = Frames(*(silence(LinkType.ETHERNET, START_NS + i * SECOND // 2) for i in range(100)))
    snapshots = list(watch_on(tap, for_s=5).snapshots())
    assert snapshots[-1].time == START_NS + 5 * SECOND


@given(slice_ms=st.integers(1, 5000), packets=st.integers(1, 60))
def test_slices_hold_every_frame_once_and_no_more_time_than_asked(slice_ms, packets):
    """A batch cut for pacing is the same batch."""
    whole = batch(speech(packets=packets))
    pieces = list(sliced(whole, slice_ms * 1_000_000))
    assert [int(t) for piece in pieces for t in piece.times] == whole.times.tolist()
    assert pieces[-1].until == whole.until
    for piece in pieces:
        assert len(piece) == 0 or piece.times[-1] - piece.times[0] < slice_ms * 1_000_000
        assert len(piece) == 0 or piece.until > piece.times[-1]


def test_a_paced_watch_stops_when_it_is_told():
    """A watch that waits for the next frames ends at once when it is stopped."""
    tap = Frames(batch(both_ways(packets=50)), batch(both_ways(start_ns=START_NS + 10**15)))
    watch = watch_on(tap, speed=1000.0)
    ended = threading.Event()
    feed = ThreadedWatch(watch)
    feed.start(lambda _: None, lambda _: ended.set())
    feed.stop()
    assert ended.wait(5)


def test_the_end_of_a_source_is_told_once():
    """The face hears every snapshot, then why there will be no more."""
    published, reasons, done = [], [], threading.Event()
    feed = ThreadedWatch(watch_on(Frames(batch(both_ways(packets=150)))))
    feed.start(published.append, lambda text: (reasons.append(text), done.set()))
    assert done.wait(10)
    assert len(published) == 3
    assert reasons == ["end of the source"]


@pytest.mark.parametrize(
    ("error", "says"),
    [(CaptureError("a.pcap", got="nonsense"), "a.pcap: nonsense"), (ValueError("odd"), "odd")],
)
def test_a_source_that_fails_is_told_in_one_line(error, says):
    """Whatever goes wrong in the thread reaches the face as a line, never as a dead thread."""
    reasons, done = [], threading.Event()
    feed = ThreadedWatch(watch_on(Frames(error=error)))
    feed.start(lambda _: None, lambda text: (reasons.append(text), done.set()))
    assert done.wait(10)
    assert says in reasons[0]
    assert "\n" not in reasons[0]
