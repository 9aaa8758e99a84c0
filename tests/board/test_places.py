"""The row of places shows what the ledger says, at any width."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from linkwatch.board.lines import plain, width
from linkwatch.board.places import (
    BROACHED,
    EDGE,
    FREE,
    KEPT,
    OVER,
    TAKEN,
    Places,
    places_line,
    places_of,
    scale_for,
    used_line,
)

any_places = st.integers(1, 3000).flatmap(
    lambda total: st.builds(
        Places, st.just(total), st.integers(0, total), st.integers(0, 5000), st.floats(0, 1e6)
    )
)


def row(places, cells=60):
    """Returns the row of places as text."""
    return plain(places_line(places, scale_for(places, cells), cells)).replace(" ", "")


def test_as_many_places_are_free_as_calls_fit(make):
    """The free places are the ledger's room, the kept ones its reserve."""
    link = make.link(calls=19)
    shown = row(places_of(link, link.to_site))
    assert shown == TAKEN * 19 + FREE * 3 + KEPT * 2


def test_a_dear_call_takes_several_places(make):
    """One G.711 call where G.729 is planned takes three places of the budget."""
    way = make.direction(1, reserved_kbps=82.4, room_calls=19)
    shown = row(places_of(make.link(), way))
    assert shown.count(TAKEN) == 3


def test_what_is_over_the_budget_hangs_past_its_end(make):
    """Beyond the edge stand as many marks as places are too many."""
    way = make.direction(27, room_calls=-5)
    shown = row(places_of(make.link(), way))
    assert shown == TAKEN * 22 + BROACHED * 2 + EDGE + OVER * 3


@pytest.mark.parametrize("room", [0, -1])
def test_a_call_in_the_reserve_is_seen_there(make, room):
    """The reserve is drawn apart and shows what has been taken of it."""
    way = make.direction(23, room_calls=room)
    assert row(places_of(make.link(), way)).endswith(BROACHED + KEPT)


def test_without_a_limit_there_are_no_places(make):
    """Nothing is drawn that the plan does not say."""
    link = make.link_without_limit()
    assert places_of(link, link.to_site) is None


def test_a_budget_in_kbit_per_second_alone_has_places(make):
    """A budget without a number of calls is as many places as planned calls go into it."""
    link = make.link(planned_calls=None, reserve_calls=0)
    assert places_of(link, make.direction(4, room_calls=20)).total == 24


@given(any_places, st.integers(12, 200))
def test_room_is_never_hidden_and_never_invented(places, cells):
    """Whatever the scale: a free place is seen if and only if there is one."""
    room = places.total - places.reserve - places.taken
    assert (FREE in row(places, cells)) == (room > 0)
    assert (OVER in row(places, cells)) <= (places.over > 0)


@given(any_places, st.integers(8, 200))
def test_both_bars_stay_in_their_strip(places, cells):
    """Neither the places nor what is used of them runs into what stands beside."""
    scale = scale_for(places, cells)
    assert width(places_line(places, scale, cells)) <= cells
    assert width(used_line(places, scale, cells)) <= cells


def test_what_is_used_is_drawn_to_the_scale_of_the_places(make):
    """Twelve places' worth of packets reach under twelve places."""
    assert plain(
        used_line(Places(24, 2, 19, 12.0), scale_for(Places(24, 2, 19, 12.0), 30), 30)
    ) == ("━" * 12)
