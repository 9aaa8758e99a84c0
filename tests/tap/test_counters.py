"""Interface counters: whatever the system's do, ours only grow."""

from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from linkwatch.tap.counters import CountersOnly, InterfaceCounters, RawCounters, grown

WRAP_32, WRAP_64 = 2**32, 2**64  # RFC 2863 3.1.6: Counter32 and Counter64 wrap to nothing


def counters_of(readings):
    """Returns counters whose system says these things, one after the other."""
    told = iter(readings)
    return InterfaceCounters("eth9", lambda _: next(told))


def raw(received, sent=0, up=True, speed_kbps=1000):
    return RawCounters(received, sent, up, speed_kbps)


@pytest.mark.parametrize(
    ("before", "now", "octets"),
    [
        (0, 0, 0),
        (1000, 1500, 500),
        (WRAP_32 - 100, WRAP_32 + 100, 200),
        (WRAP_32 - 100, 50, 150),
        (WRAP_32 - 1, 0, 1),
        (WRAP_64 - 100, 50, 150),
        (WRAP_64 - 1, 0, 1),
        (1_000_000, 300, 300),
        (1_000_000, 0, 0),
        (WRAP_32 + 5_000, 700, 700),
    ],
)
def test_wraps_are_made_good_and_a_new_beginning_counts_from_nothing(before, now, octets):
    """A wrap at 32 or 64 bits loses no octet, and a counter that begins again adds what it has."""
    assert grown(before, now) == octets


@given(st.integers(0, WRAP_32 - 1), st.integers(0, WRAP_32 // 2 - 1))
def test_a_32_bit_counter_loses_nothing_while_less_than_half_its_range_passes(before, octets):
    """Between two looks at a Counter32, every octet up to half its range is counted."""
    assert grown(before, (before + octets) % WRAP_32) == octets


OF_THE_SYSTEM = st.none() | st.builds(
    raw, st.integers(0, WRAP_64 - 1), st.integers(0, WRAP_64 - 1), st.booleans()
)


@given(st.lists(OF_THE_SYSTEM, min_size=2, max_size=20))
def test_readings_never_fall_whatever_the_system_says(told):
    """No wrap, reset or vanished port makes a reading smaller than the one before."""
    counters = counters_of(told)
    readings = [counters.read(now) for now in range(len(told))]
    for before, after in pairwise(readings):
        assert after.received >= before.received
        assert after.sent >= before.sent
    assert [reading.time for reading in readings] == list(range(len(told)))


def test_a_port_that_vanishes_keeps_its_last_figures_and_is_down():
    """Without the port the figures stand still, and it is told as down."""
    counters = counters_of([raw(100, 10), raw(400, 30), None, None])
    for now in (1, 2):
        counters.read(now)
    for now in (3, 4):
        gone = counters.read(now)
        assert (gone.received, gone.sent, gone.up, gone.speed_kbps) == (300, 20, False, 1000)


def test_a_port_that_returns_counts_on():
    """A port plugged in again begins at nothing and adds to what was counted before."""
    counters = counters_of([raw(1000), raw(1400), None, raw(70), raw(90)])
    got = [counters.read(now) for now in range(5)]
    assert [reading.received for reading in got] == [0, 400, 400, 470, 490]
    assert [reading.up for reading in got] == [True, True, False, True, True]


def test_a_port_that_was_never_there_reads_as_down_and_empty():
    """A name that the system does not know has nothing counted, and is no error."""
    reading = InterfaceCounters("no-such-port").read(5)
    assert (reading.received, reading.sent) == (0, 0)
    assert (reading.up, reading.speed_kbps) == (False, 0)


def test_a_tap_of_counters_only_yields_silences_until_it_is_closed():
    """Without the right to read packets time still passes, without frames, and closing ends it."""
    tap = CountersOnly("lo", ("packets may not be read",))
    untils = []
    for batch in tap.batches():
        assert len(batch) == 0
        untils.append(batch.until)
        tap.close()
    tap.close()
    assert len(untils) == 1
    assert list(tap.batches()) == []
    assert tap.name == "lo"
    assert tap.statistics().frames == 0
    assert tap.statistics().remarks == ("packets may not be read",)
    assert tap.counters().time >= untils[0]


def test_the_time_of_silences_moves_on(monkeypatch):
    """Each silence brings time further than the last."""
    monkeypatch.setattr("linkwatch.tap.counters.LOOK_S", 0.01)
    tap = CountersOnly("lo")
    batches = tap.batches()
    first, second = next(batches), next(batches)
    tap.close()
    assert second.until > first.until
    assert list(batches) == []
