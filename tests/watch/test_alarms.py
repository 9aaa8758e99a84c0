"""Alarms: raised, held and cleared."""

from hypothesis import given
from hypothesis import strategies as st

from linkwatch.watch.alarms import TRANSITIONS, AlarmBook, Condition, Sign, State
from linkwatch.watch.snapshot import Kind, Severity

SECOND = 10**9


def over(sign=Sign.HOLDS, at_once=False, subject="to site", severity=Severity.MAJOR):
    return Condition(Kind.OVER_BUDGET, severity, "wan", subject, "too much", sign, at_once)


def book_after(looks, hold_s=5.0):
    """Returns a book that looked once a second at these conditions."""
    book = AlarmBook(hold_s)
    for second, conditions in enumerate(looks):
        book.look(conditions, second * SECOND)
    return book


def test_an_alarm_is_raised_only_after_the_hold_time():
    """What lasts shorter than the hold time raises nothing."""
    assert book_after([[over()]] * 5).standing() == ()
    (alarm,) = book_after([[over()]] * 6).standing()
    assert alarm.raised == 5 * SECOND


def test_a_break_begins_the_hold_time_anew():
    """Two short spells are not one long one."""
    assert book_after([[over()]] * 4 + [[]] + [[over()]] * 4).standing() == ()


def test_an_alarm_clears_only_after_the_hold_time():
    """An alarm whose condition comes back soon stands all the while."""
    raised = [[over()]] * 6
    assert len(book_after([*raised, [], [], [over()]]).standing()) == 1
    book = book_after([*raised, *[[]] * 6])
    assert book.standing() == ()
    (alarm,) = book.cleared()
    assert (alarm.raised, alarm.cleared) == (5 * SECOND, 11 * SECOND)


def test_near_the_limit_keeps_an_alarm_and_raises_none():
    """Hysteresis: within the band nothing is raised, and nothing is cleared."""
    near = [[over(Sign.NEAR)]]
    assert book_after(near * 20).standing() == ()
    assert len(book_after([[over()]] * 6 + near * 20).standing()) == 1


def test_what_may_be_over_in_a_moment_is_raised_at_once():
    """Frames dropped in one second are told, though the next second drops none."""
    book = book_after([[over(at_once=True)], []])
    assert len(book.standing()) == 1


def test_the_worst_stands_first():
    """Alarms stand in the order of X.733's severities, then of age."""
    book = AlarmBook(0)
    book.look([over(severity=Severity.MINOR, subject="a")], 0)
    book.look(
        [over(severity=Severity.MINOR, subject="a"), over(severity=Severity.CRITICAL)], SECOND
    )
    assert [alarm.severity for alarm in book.standing()] == ["critical", "minor"]


def test_every_state_knows_what_to_do_with_every_sign():
    """The table of transitions has no hole, but for a calm that has gone, which is not kept."""
    pairs = {(state, sign) for state in State for sign in Sign}
    assert pairs - set(TRANSITIONS) == {(State.CALM, Sign.GONE)}


@given(st.lists(st.sampled_from([None, Sign.HOLDS, Sign.NEAR]), max_size=60), st.integers(0, 6))
def test_an_alarm_is_cleared_as_often_as_raised_or_still_stands(signs, hold_s):
    """However a condition comes and goes, the books balance, and times run forwards."""
    book = book_after([[over(sign)] if sign else [] for sign in signs], hold_s)
    for alarm in book.all():
        assert alarm.cleared is None or alarm.cleared >= alarm.raised
    assert len([alarm for alarm in book.all() if alarm.cleared is None]) == len(book.standing())
