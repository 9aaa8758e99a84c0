"""The trend remembers an hour and draws it on a scale that stays."""

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from linkwatch.board.history import History, drawn_ways
from linkwatch.board.lines import plain
from linkwatch.board.trendgraph import BEYOND, LIMIT, RESERVED, scale_top, trend_lines

SECOND = 1_000_000_000


def a_history(make, used, reserved=0.0, seconds=300):
    """Returns the history of a link that used and reserved the same all the time."""
    history = History()
    way = make.direction(0, used_kbps=used, reserved_kbps=reserved)
    for second in range(seconds):
        history.take(second * SECOND, make.link(to_site=way, from_site=make.direction(0)))
    return history


def graph(history, budget=660.0, width=80, rows=12):
    """Returns the graph as text lines."""
    return [plain(row) for row in trend_lines(history, budget, 5, width, rows)]


def test_use_reserve_and_budget_have_glyphs_of_their_own(make):
    """Without any colour one sees what is used, what is reserved, and the budget's line."""
    shown = "\n".join(graph(a_history(make, 200.0, 400.0)))
    assert "█" in shown
    assert RESERVED in shown
    assert LIMIT in shown
    assert "  660.0 ┤" in shown


def test_what_is_over_the_budget_looks_different(make):
    """Use above the budget's line is drawn with another glyph."""
    for used in (661.0, 900.0, 9e6):
        assert BEYOND in "".join(graph(a_history(make, used)))
    for used in (0.0, 600.0, 660.0):
        assert BEYOND not in "".join(graph(a_history(make, used)))


def test_without_a_budget_there_is_no_line(make):
    """A link without limit has a trend, and no limit is invented for it."""
    assert LIMIT not in "".join(graph(a_history(make, 200.0), None)[:-1])


def test_too_little_space_is_said():
    """A graph that cannot be read is not drawn."""
    assert "too little space" in graph(History(), None, 12, 3)[0]


@given(st.floats(0, 1e9))
def test_the_scale_holds_the_peak(peak):
    """Nothing is drawn beyond the top of the scale."""
    assert scale_top(660.0, peak) >= peak


def test_the_scale_does_not_move_below_the_budget():
    """A quiet link and a busy one are drawn to the same scale."""
    assert scale_top(660.0, 1.0) == scale_top(660.0, 700.0)


@pytest.mark.parametrize("width", [30, 71, 400])
def test_peaks_survive_the_columns(make, width):
    """One loud second in an hour is seen at any width."""
    history = a_history(make, 100.0, seconds=1800)
    loud = replace(make.link(), to_site=make.direction(0, used_kbps=999.0))
    history.take(1800 * SECOND, loud)
    _, columns = history.columns(60, width)
    assert len(columns) <= width
    assert max(column[0] for column in columns if column) == 999.0


def test_an_hour_is_kept_and_no_more(make):
    """Memory is bounded however long one watches."""
    history = a_history(make, 1.0, seconds=4000)
    each, columns = history.columns(60, 3600)
    assert each == 1
    assert sum(column is not None for column in columns) == 3600


def test_directions_with_budgets_of_their_own_are_not_mixed(make):
    """A line is held against the budget of the direction that it shows."""
    wide, narrow = make.direction(20, budget_kbps=900.0), make.direction(5, budget_kbps=300.0)
    assert drawn_ways(make.link(to_site=wide, from_site=narrow)) == ("from site", (narrow,))
    assert drawn_ways(make.link(to_site=narrow, from_site=wide)) == ("to site", (narrow,))
    unlimited = make.direction(20, budget_kbps=None)
    assert drawn_ways(make.link(to_site=wide, from_site=unlimited)) == ("to site", (wide,))


def test_time_that_goes_back_begins_anew(make):
    """A capture that is read again does not lie over its first reading."""
    history = a_history(make, 500.0)
    history.take(0, make.link(calls=0))
    _, columns = history.columns(5, 60)
    assert [column for column in columns if column] == [(0.0, 0.0)]
