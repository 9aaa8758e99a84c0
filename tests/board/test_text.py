"""Text and figures on the screen: harmless, bounded, of a width that does not dance."""

import unicodedata

import pytest
from hypothesis import given
from hypothesis import strategies as st
from rich.cells import cell_len

from linkwatch.board.lines import Piece, fitted, line, width
from linkwatch.board.text import (
    clock,
    decimal,
    duration,
    kbps,
    padded,
    safe,
    wrapped,
)

HOSTILE = (
    "\x1b]0;owned\x07",
    "\x9b2J",
    "a\u202eb",
    "zero\u200bwidth",
    "x" + "\u0301" * 500,
    "\ud800",
    "[/x][@click=app.quit]here[/]",
    "家" * 300,
    "\r\n\t",
    "e\ufe0f\u200d\U0001f469",
)
foreign = st.text() | st.text(st.sampled_from("".join(HOSTILE))) | st.sampled_from(HOSTILE)


def is_harmless(text):
    """Whether no character of a text steers a terminal or hides."""
    return all(
        character == " " or unicodedata.category(character) not in ("Cc", "Cf", "Cs", "Co", "Cn")
        for character in text
    )


@given(foreign, st.integers(0, 90))
def test_foreign_text_is_harmless_and_keeps_to_its_limit(text, limit):
    """Any text comes out without control codes and at most as wide as was allowed."""
    shown = safe(text, limit)
    assert is_harmless(shown)
    assert cell_len(shown) <= limit
    assert len(shown) <= 3 * limit + 1


@given(foreign)
def test_a_second_cleaning_changes_nothing(text):
    """What is clean stays as it is."""
    assert safe(safe(text, 40), 40) == safe(text, 40)


@given(foreign, st.integers(0, 60), st.booleans())
def test_a_padded_text_has_exactly_its_width(text, cells, right):
    """Columns stay in line whatever stands in them."""
    assert cell_len(padded(text, cells, right=right)) == cells


@given(st.lists(foreign, max_size=5), st.integers(0, 60))
def test_a_fitted_line_has_exactly_its_width(texts, cells):
    """A line of any pieces fills its place, no more and no less."""
    assert width(fitted(line(*map(Piece, texts)), cells)) == cells


@given(foreign, st.integers(1, 40), st.integers(1, 5))
def test_wrapped_text_stays_in_its_box(text, cells, most):
    """A remark of any kind takes no more lines and cells than it was given."""
    lines = wrapped(text, cells, most)
    assert 1 <= len(lines) <= most
    assert all(cell_len(row) <= max(cells, 2) and is_harmless(row) for row in lines)


@pytest.mark.parametrize("name", ["Kiln Lane depot", "Møllegård", "बिजली", "倉庫"])
def test_names_in_living_scripts_are_left_alone(name):
    """A name that people really write is shown as they write it."""
    assert safe(name, 40) == name


@pytest.mark.parametrize(
    ("rate", "shown"),
    [(0.0, "    0.0"), (212.84, "  212.8"), (99_999.9, "99999.9"), (None, "      -"),
     (123_456.0, "1.23e+05"[:6] + "…"), (float("nan"), "    nan")],
)  # fmt: skip
def test_a_rate_takes_seven_cells(rate, shown):
    """Rates do not dance, however large or unknown."""
    assert kbps(rate) == shown


@given(st.none() | st.floats(), st.integers(1, 9))
def test_a_figure_keeps_its_width_and_never_loses_a_digit(value, cells):
    """A figure that finds no space is not shown as another one."""
    shown = decimal(value, cells)
    assert len(shown) == cells
    digits = shown.strip()
    if value is not None and abs(value) < 1e12 and digits.lstrip("-").isdigit():
        assert int(digits) == round(value)


@pytest.mark.parametrize("time", [None, 10**30, -(10**30)])
def test_a_time_that_is_none_is_shown_as_dashes(time):
    """A time that is not known or not possible gives no error."""
    assert clock(time) == "--:--:--"


@pytest.mark.parametrize(
    ("seconds", "shown"),
    [(-5, "   0:00"), (59, "   0:59"), (3600, "1:00:00"), (99 * 3600, "99:00:00"[:8]),
     (240 * 3600, "   10 d")],
)  # fmt: skip
def test_a_duration_is_read_at_a_glance(seconds, shown):
    """Lengths of time are minutes and seconds, then hours, then days."""
    assert duration(seconds * 1_000_000_000) == shown
