"""A link's block says in words what its row of places shows."""

import pytest

from linkwatch.board.bigword import DOTS, full_size, half_size
from linkwatch.board.lines import plain, width
from linkwatch.board.linkblock import Space, links_lines
from linkwatch.board.verdict import verdict_on

SPACES = (Space(60, compact=True), Space(80), Space(120), Space(200, airy=True))


def words(snapshot, space=SPACES[1], chosen=0, blocks=1):
    """Returns the block as text."""
    return "\n".join(plain(row) for row in links_lines(snapshot, chosen, space, blocks))


@pytest.mark.parametrize(
    ("calls", "word", "meaning"),
    [(19, "ROOM 3", "3 planned calls fit"), (21, "ROOM 1", "1 planned call fits"),
     (22, "FULL", "no planned call fits"), (27, "OVER 3", "3 places over the budget")],
)  # fmt: skip
def test_one_word_says_whether_another_call_fits(make, calls, word, meaning):
    """Room, full or over: the word and the sentence agree."""
    verdict = verdict_on(make.link(calls=calls), hearing=True)
    assert (verdict.word, verdict.meaning) == (word, meaning)


def test_the_tighter_direction_decides(make):
    """A link has no more room than its fuller direction."""
    link = make.link(to_site=make.direction(22), from_site=make.direction(5))
    assert verdict_on(link, hearing=True).word == "FULL"


def test_the_figures_of_both_directions_stand_beside(make):
    """Calls, reserved and used kbit/s and the budget are there to be read."""
    shown = words(make.snapshot(19))
    assert "19/24 up" in shown
    assert "reserved   522.5  used   475.0 of   660.0 kbit/s" in shown
    assert shown.count("room 3") == 2


def test_a_link_without_limit_says_so(make):
    """Where the plan sets no limit, the calls are counted and no places are drawn."""
    shown = words(make.snapshot(links=(make.link_without_limit(),)))
    assert "no limit in the plan" in shown
    assert "□" not in shown


@pytest.mark.parametrize("space", SPACES)
def test_a_budget_that_holds_no_call_is_not_called_unlimited(make, space):
    """A budget smaller than one planned call is full, and says why."""
    way = make.direction(0, room_calls=0, budget_kbps=20.0)
    link = make.link(planned_calls=0, reserve_calls=0, to_site=way, from_site=way)
    shown = words(make.snapshot(0, links=(link,)), space)
    assert "the budget holds no planned call" in shown
    assert "no limit" not in shown


def test_guessed_directions_are_called_guessed(make):
    """Without site prefixes the block does not pretend to know which way is which."""
    link = make.link(directions_known=False)
    assert "directions guessed" in words(make.snapshot(links=(link,)))
    assert "to site?" in words(make.snapshot(links=(link,)), SPACES[0])


def test_counters_alone_are_said_to_be_counters(make):
    """Without packets the load stands against the capacity, and what would fit beside it."""
    shown = words(make.counters_only())
    assert "Counters only" in shown
    assert "1400.0 of 2048.0 kbit/s" in shown
    assert "23 planned calls fit" in shown
    assert "costs 27.5 kbit/s" in shown


@pytest.mark.parametrize(
    ("load", "capacity", "said"),
    [(None, 2048.0, "load not known"), (900.0, None, "capacity not in the plan")],
)
def test_what_the_counters_do_not_say_is_not_drawn(make, load, capacity, said):
    """A missing figure is told in words."""
    way = make.direction(0, capacity_kbps=capacity)
    link = make.link(to_site=way, from_site=way, link_kbps=load, fit_beside_load=None)
    shown = words(make.counters_only(links=(link,)), Space(120))
    assert said in shown
    assert "not known what fits" in shown


def test_no_plan_is_said_with_its_remedy(make):
    """Without any link the board says what is missing and how to give it."""
    assert "--plan" in words(make.snapshot(links=()))


def test_other_links_are_named_with_their_words(make):
    """Of several links the chosen one is in full, and none is out of sight."""
    links = (make.link("wan"), make.link("quarry", calls=24), make.link("ferry", calls=3))
    shown = words(make.snapshot(links=links), chosen=1)
    assert "►quarry FULL" in shown
    assert "ferry ROOM 19" in shown
    assert "wan ROOM 3" in shown


@pytest.mark.parametrize("space", SPACES)
@pytest.mark.parametrize("calls", [0, 19, 22, 27, 5000])
def test_every_line_is_as_wide_as_its_space(make, space, calls):
    """No line runs over the edge or leaves old cells standing."""
    link = make.link(calls=calls, planned_calls=2400, name="[/x]\x1b[31m" + "w" * 90)
    rows = links_lines(make.snapshot(calls, calls=(), links=(link,) * 3), 0, space, 2)
    assert {width(row) for row in rows} == {space.width}
    assert all(plain(row).isprintable() for row in rows)


def test_a_number_too_large_for_its_place_is_not_cut_short(make):
    """Large letters never show a part of a number; the sentence has it in full."""
    way = make.direction(0, room_calls=12_345)
    link = make.link(planned_calls=13_000, to_site=way, from_site=way)
    shown = words(make.snapshot(0, links=(link,)))
    assert "12345 planned calls fit" in shown
    assert half_size("ROOM")[0] in shown
    assert half_size("ROOM 1")[0] not in shown


@pytest.mark.parametrize("word", ["ROOM 12", "FULL", "OVER 3", "FITS 9", "UP 0", ""])
def test_large_letters_are_even(word):
    """Every row of a large word is as long as the others, and no letter is missing."""
    assert set(word) <= set(DOTS)
    for size in (half_size, full_size):
        assert len({len(row) for row in size(word)}) == 1
