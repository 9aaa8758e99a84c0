"""The calls table keeps what matters as it gets narrow."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from linkwatch.board.callcolumns import COLUMNS, Row, call_line, columns_for, head_line
from linkwatch.board.lines import plain, width
from linkwatch.board.widgets.calls import alarmed_calls, rows_of

NOW = 1_700_000_000_000_000_000
STAYING = ["", "here → there", "codec", "kbit/s", "state"]


def shown(call, cells=80, *, alarmed=False):
    """Returns a call's line as text."""
    return plain(call_line(Row(call, NOW, alarmed), cells))


@pytest.mark.parametrize(
    ("trouble", "word"),
    [({"both_ways": False}, "one-way"), ({"as_planned": False}, "unplanned"),
     ({"marking_right": False}, "marking")],
)  # fmt: skip
def test_a_call_in_trouble_has_a_sign_and_a_word(make, trouble, word):
    """Trouble is seen without colour."""
    text = shown(make.call(7, **trouble))
    assert text.startswith("!")
    assert text.rstrip().endswith(word)


def test_an_alarm_on_a_call_marks_its_row(make):
    """Poor quality has no field of its own; the alarm on the call tells it."""
    assert alarmed_calls((make.alarm(subject="call 7 from 10.20.1.8:16398"),)) == {"7"}
    assert "poor" in shown(make.call(7), alarmed=True)


@pytest.mark.parametrize(
    ("state", "word"), [({}, "up"), ({"up": False}, "ended"), ({"crosses": ()}, "elsewhere")]
)
def test_a_call_in_order_has_no_sign(make, state, word):
    """The sign is kept for trouble."""
    text = shown(make.call(7, **state))
    assert text.startswith(" ")
    assert text.rstrip().endswith(word)


def test_columns_go_in_their_order():
    """As space gets short the least needed column goes first, and some never go."""
    gone = []
    for cells in range(200, 20, -1):
        titles = {column.title for column in columns_for(cells)[0]}
        gone += [c for c in COLUMNS if c.title not in titles and c not in gone]
    assert [column.going for column in gone] == sorted(column.going for column in gone)
    assert [column.title for column in COLUMNS if not column.going] == STAYING


def test_eighty_cells_hold_loss_jitter_and_cost():
    """A plain terminal shows what a technician asks for first."""
    titles = {column.title for column in columns_for(79)[0]}
    assert {"call", "codec", "kbit/s", "loss", "jitter", "state"} <= titles


@given(
    cells=st.integers(50, 250),
    number=st.integers(1, 99_999),
    loss=st.floats(0, 1e6),
    jitter=st.none() | st.floats(0, 1e5),
)
def test_rows_and_heading_are_in_line(make, cells, number, loss, jitter):
    """Every row has the width of the heading, whatever its figures."""
    call = make.call(number, loss_percent=loss, jitter_ms=jitter, codec="PCMU/G729", dscp=44)
    row = call_line(Row(call, NOW, alarmed=False), cells)
    assert width(row) == width(head_line(cells)) <= max(cells, 54)


def test_ports_go_before_addresses_are_cut(make):
    """A long address is shown whole as long as leaving out its port is enough."""
    text = shown(make.call(here="192.168.100.200:16384", there="[2001:db8:20::1]:5004"))
    assert "192.168.100.200" in text
    assert "2001:db8:20::1" in text


def test_trouble_can_come_first(make):
    """By number, or those in trouble first; what has ended is below both."""
    calls = (make.call(1), make.call(2, up=False, both_ways=False), make.call(3, both_ways=False))
    snapshot = make.snapshot(calls=calls)
    assert [r.call.id for r in rows_of(snapshot, troubled_first=False)] == [1, 3, 2]
    assert [r.call.id for r in rows_of(snapshot, troubled_first=True)] == [3, 1, 2]
