"""The admission budget: what room is left, and never a call too many."""

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from linkwatch.plan.budget import Budget

PRICES = st.sampled_from([11.6, 17.0667, 29.6, 87.2, 106.0, 256 / 15])


def budget(calls=None, kbps=None, reserve=0, price=10.0):
    """Builds a budget that is limited only as a test says."""
    return Budget(calls=calls, kbps=kbps, reserve_calls=reserve, call_kbps=price)


def test_no_limit_leaves_no_figure():
    """Room is not known where nothing limits it."""
    assert budget().room(500, 1e6) is None


def test_the_smaller_of_both_limits_counts():
    """Calls and kbit/s are both kept."""
    assert budget(calls=24, kbps=100).room(0, 0.0) == 10
    assert budget(calls=4, kbps=100).room(0, 0.0) == 4


def test_the_reserve_stays_free():
    """Two reserved calls are not given away."""
    assert budget(calls=24, reserve=2).room(20, 200.0) == 2
    assert budget(kbps=100, reserve=2).room(8, 80.0) == 0


def test_dear_calls_take_more_room():
    """A call that costs three planned ones leaves room for three fewer."""
    assert budget(kbps=100).room(1, 30.0) == 7


def test_room_is_never_below_none():
    """Over the limit there is no room; it is not negative."""
    assert budget(calls=2, kbps=20, reserve=1).room(9, 900.0) == 0


@given(st.integers(0, 2000), st.integers(0, 20), PRICES)
def test_a_limit_that_is_met_exactly_is_room(calls, reserve, price):
    """Float dust of many added costs takes no call away and gives none."""
    assume(reserve <= calls)
    limit = sum([price] * calls)
    assert budget(kbps=limit, price=price).calls_that_fit(calls * price) == calls
    assert budget(kbps=limit, reserve=reserve, price=price).room(0, 0.0) == calls - reserve


@given(st.integers(1, 500), st.floats(1, 1e5), PRICES, st.integers(0, 5))
def test_each_call_that_is_let_in_takes_one_from_the_room(calls, kbps, price, reserve):
    """Filling a link call by call ends at no room, and within both limits."""
    full = budget(calls=calls, kbps=kbps, reserve=reserve, price=price)
    room = full.room(0, 0.0)
    after = full.room(room, room * price)
    assert after == 0
    assert room <= max(0, calls - reserve)
    assert room == 0 or (room + reserve) * price <= kbps + 1e-5 * price


@pytest.mark.parametrize(("kbps", "fit"), [(0.0, 0), (-5.0, 0), (9.99, 0), (10.0, 1), (29.9, 2)])
def test_whole_calls_fit_only(kbps, fit):
    """Half a call is none."""
    assert budget().calls_that_fit(kbps) == fit


def test_the_reserve_is_planned_calls_in_kbit_s():
    """Two calls of 11.6 kbit/s."""
    assert budget(calls=24, reserve=2, price=11.6).reserve_kbps == pytest.approx(23.2)
