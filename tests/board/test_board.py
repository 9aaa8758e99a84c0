"""The whole board, by keys and at every size."""

import pytest
from rich.cells import cell_len

from linkwatch.board.app import Board
from linkwatch.board.screens.call import CallPage, CallSheet
from linkwatch.board.screens.notices import Cautions, Help
from linkwatch.board.widgets.alarms import Alarms
from linkwatch.board.widgets.banner import Banner
from linkwatch.board.widgets.calls import Calls
from linkwatch.board.widgets.keyline import KeyLine
from linkwatch.board.widgets.links import Links
from linkwatch.board.widgets.masthead import Masthead
from linkwatch.board.widgets.panebar import PaneBar
from linkwatch.board.widgets.tap import TapPane
from linkwatch.board.widgets.trend import Trend
from linkwatch.errors import TapError

SIZES = [(60, 16), (80, 24), (120, 40), (200, 60)]
HOSTILE = "[/x][@click=app.quit]\x1b[2J\u202e\ud800" + "w" * 300


async def show(pilot, feed, snapshot):
    """Publishes a snapshot as a feed does, and waits until it is painted."""
    feed.publish(snapshot)
    await pilot.pause()


def words(board, pane):
    """Returns what a pane shows."""
    return board.screen.query_one(pane).words


def screen_lines(board):
    """Returns the screen as text lines, as the terminal would show them."""
    return [
        "".join(segment.text for segment in strip)
        for strip in board.screen._compositor.render_strips()
    ]


@pytest.mark.parametrize("size", SIZES)
async def test_every_state_stands_at_every_size(make, feed, size):
    """No state of the link breaks the board, and its word is always in sight."""
    states = {
        "8 planned calls fit|ROOM 8": make.snapshot(14),
        "no planned call fits|FULL": make.snapshot(22, alarms=(make.alarm(),)),
        "3 places over|OVER 3": make.snapshot(27, alarms=(make.alarm(),)),
        "Counters only": make.counters_only(),
        "no limit": make.snapshot(links=(make.link_without_limit(),)),
        "No plan": make.snapshot(links=()),
    }
    board = Board("tap eth1", feed)
    async with board.run_test(size=size) as pilot:
        for said, snapshot in states.items():
            await show(pilot, feed, snapshot)
            lines = screen_lines(board)
            assert any(words in "\n".join(lines) for words in said.split("|"))
            assert len(lines) == size[1]
            assert {cell_len(row) for row in lines} == {size[0]}
            assert "Kiln Lane depot" in lines[0]


@pytest.mark.parametrize("size", SIZES)
async def test_every_key_works_at_every_size(make, feed, size, tmp_path):
    """Each key does something, and none does harm."""
    board = Board("tap eth1", feed, screenshots=tmp_path)
    links = (make.link(), make.link("quarry", calls=24))
    async with board.run_test(size=size, notifications=True) as pilot:
        await show(pilot, feed, make.snapshot(links=links, alarms=(make.alarm(),)))
        await pilot.press("pagedown", "home", "enter", "escape", "l", "p", "p", "o")
        await pilot.press("t", "t", "tab", "question_mark", "escape", "s", "q")
    assert board.return_value == 0
    assert feed.stops >= 1


async def test_keys_before_the_first_snapshot_do_no_harm(feed, tmp_path):
    """Whoever is faster than the tap breaks nothing."""
    board = Board("tap eth1", feed, screenshots=tmp_path)
    async with board.run_test(size=(80, 24)) as pilot:
        await pilot.press("p", "l", "o", "down", "end", "enter", "a", "t", "t", "tab", "s")
        assert board.is_running


async def test_a_call_page_shows_both_directions_and_goes_on(make, feed):
    """Enter opens the call under the cursor; its figures go on with each snapshot."""
    board = Board("tap eth1", feed)
    async with board.run_test(size=(80, 24)) as pilot:
        await show(pilot, feed, make.snapshot(3))
        await pilot.press("down", "enter")
        assert isinstance(board.screen, CallPage)
        shown = words(board, CallSheet)
        assert "Call 2" in shown
        for figure in ("1,500", "1,503", "0x1234abcd", "G729, by static", "9.4 ms", "EF", "90,000"):
            assert shown.count(figure) == 2
        await show(pilot, feed, make.snapshot(calls=(make.call(2, both_ways=False, streams=()),)))
        assert "nothing heard" in words(board, CallSheet)
        await show(pilot, feed, make.snapshot(0))
        assert "has left the list" in words(board, CallSheet)
        await pilot.press("escape")
        assert not isinstance(board.screen, CallPage)


async def test_the_mouse_chooses_and_opens_a_call(make, feed):
    """A click moves the cursor, a second one opens the call."""
    board = Board("tap eth1", feed)
    async with board.run_test(size=(80, 24)) as pilot:
        await show(pilot, feed, make.snapshot(5))
        await pilot.click(Calls, offset=(10, 3))
        assert board.screen.query_one(Calls).at_cursor.id == 3
        await pilot.click(Calls, offset=(10, 4), times=2)
        assert isinstance(board.screen, CallPage)


async def test_the_cursor_stays_on_its_call(make, feed):
    """Calls that come and go do not move the cursor to another call."""
    board = Board("tap eth1", feed)
    async with board.run_test(size=(80, 24)) as pilot:
        await show(pilot, feed, make.snapshot(9))
        await pilot.press("down", "down", "down")
        await show(pilot, feed, make.snapshot(calls=tuple(make.call(n) for n in (2, 3, 4, 5, 10))))
        assert board.screen.query_one(Calls).at_cursor.id == 4


async def test_thousands_of_calls_are_scrolled_through(make, feed):
    """Two thousand calls stand in the table, and its last one can be reached."""
    board = Board("tap eth1", feed)
    async with board.run_test(size=(120, 40)) as pilot:
        await show(pilot, feed, make.snapshot(2000))
        await pilot.press("end")
        assert board.screen.query_one(Calls).at_cursor.id == 2000
        assert "2000 10.20." in "\n".join(screen_lines(board))


async def test_a_small_screen_shows_one_pane_a_large_one_all(make, feed):
    """At 80x24 tab goes from pane to pane; where there is space all stand at once."""
    board = Board("tap eth1", feed)
    async with board.run_test(size=(80, 24)) as pilot:
        await show(pilot, feed, make.snapshot())
        for key, pane in (("tab", Alarms), ("tab", Trend), ("shift+tab", Alarms)):
            await pilot.press(key)
            assert [type(w) for w in board.screen.query(".pane") if w.region.width] == [pane]
        await pilot.click(PaneBar, offset=(42, 0))
        assert board.screen.query_one(TapPane).has_focus
        await pilot.resize_terminal(160, 45)
        await pilot.pause()
        assert all(widget.region.width for widget in board.screen.query(".pane"))


async def test_the_worst_alarm_stands_in_the_banner(make, feed):
    """Sign, severity and cause are words, and the others are counted."""
    board = Board("tap eth1", feed)
    async with board.run_test(size=(120, 24)) as pilot:
        await show(pilot, feed, make.snapshot())
        assert "no alarm stands" in words(board, Banner)
        cleared = (make.alarm(subject="call 9", cleared=make.snapshot().time),)
        await show(pilot, feed, make.snapshot(alarms=(make.alarm(),) * 3, cleared=cleared))
        assert "!!  major one-way  wan call 2: audio only" in words(board, Banner)
        assert "+2 more" in words(board, Banner)
        await pilot.press("a")
        assert "cleared lately: 1" in words(board, Alarms)


async def test_a_held_picture_says_so_while_counting_goes_on(make, feed):
    """Held, the picture stays and says PAUSED; afterwards the latest snapshot is shown."""
    board = Board("tap eth1", feed)
    async with board.run_test(size=(80, 24)) as pilot:
        await show(pilot, feed, make.snapshot(14))
        await pilot.press("p")
        await show(pilot, feed, make.snapshot(20))
        assert "PAUSED" in words(board, Masthead)
        assert "14 calls up" in words(board, Masthead)
        await pilot.press("enter")
        assert isinstance(board.screen, CallPage)
        assert "PAUSED" in words(board, Masthead)
        await pilot.press("p")
        assert "PAUSED" not in words(board, Masthead)
        assert "20 calls up" in words(board, Masthead)


async def test_the_trend_changes_its_span(make, feed):
    """The key goes to the trend first, then through its spans."""
    board = Board("tap eth1", feed)
    async with board.run_test(size=(80, 24)) as pilot:
        await show(pilot, feed, make.snapshot())
        for minutes in (5, 15, 60, 5):
            await pilot.press("t")
            assert f"last {minutes} min" in words(board, Trend)
            assert f"trend {minutes} min" in words(board, PaneBar)


async def test_the_end_of_a_capture_leaves_the_last_picture(make, feed):
    """What was seen last stays, and a line says that nothing follows."""
    board = Board("trace.pcap", feed)
    async with board.run_test(size=(80, 24)) as pilot:
        await show(pilot, feed, make.snapshot(14))
        feed.finished("end of capture")
        await pilot.pause()
        assert any("■ end of capture" in row for row in screen_lines(board))
        assert "14 calls up" in words(board, Masthead)


async def test_a_feed_that_cannot_start_says_why(feed):
    """An error of the tap is a line on the board, not a traceback."""

    def refuse(*_):
        raise TapError("tap eth7", got="no such port")

    feed.start = refuse
    board = Board("tap eth7", feed)
    async with board.run_test(size=(80, 24)) as pilot:
        await pilot.pause()
        assert any("tap eth7: no such port" in row for row in screen_lines(board))


async def test_cautions_are_read_before_the_board(make, feed):
    """The notice lies over the board until any key, and comes once."""
    board = Board("tap eth1", feed, cautions=["Never refuse an emergency call. " * 8] * 3)
    async with board.run_test(size=(60, 16)) as pilot:
        await show(pilot, feed, make.snapshot())
        assert isinstance(board.screen, Cautions)
        await pilot.press("down")
        assert isinstance(board.screen, Cautions)
        await pilot.press("x")
        assert not isinstance(board.screen, Cautions)


async def test_help_names_every_key_of_the_board(make, feed):
    """Each key that the board listens to is on the help page, and has an id and a tooltip."""
    board = Board("tap eth1", feed)
    async with board.run_test(size=(80, 24)) as pilot:
        await show(pilot, feed, make.snapshot())
        ours = (*Board.BINDINGS, *type(board.screen).BINDINGS, *Calls.BINDINGS)
        await pilot.press("question_mark")
        assert isinstance(board.screen, Help)
        page = " ".join(str(static.render()) for static in board.screen.query("Static"))
        for binding in ours:
            assert binding.id
            assert binding.tooltip
            if len(binding.key) == 1:
                assert f"\n{binding.key} " in f"\n{page}"


async def test_the_way_out_is_named_at_any_width(make, feed):
    """As space gets short other keys go from the last line before help and quit do."""
    board = Board("tap eth1", feed)
    async with board.run_test(size=(60, 16)) as pilot:
        await show(pilot, feed, make.snapshot(links=(make.link(), make.link("quarry"))))
        assert "a alarms" in words(board, KeyLine)
        await pilot.resize_terminal(30, 16)
        assert "a alarms" not in words(board, KeyLine)
        assert words(board, KeyLine).endswith("? help  q quit")
        await pilot.click(KeyLine, offset=(words(board, KeyLine).index("help"), 0))
        assert isinstance(board.screen, Help)


async def test_a_saved_screen_says_where(make, feed, tmp_path):
    """The SVG file lies where the notice says."""
    board = Board("tap eth1", feed, screenshots=tmp_path)
    async with board.run_test(size=(80, 24), notifications=True) as pilot:
        await show(pilot, feed, make.snapshot())
        await pilot.press("s")
        (saved,) = tmp_path.glob("linkwatch-*.svg")
        assert "Kiln" in saved.read_text()
        assert [str(saved) in note.message for note in board._notifications] == [True]


async def test_a_folder_that_is_not_there_is_a_notice(make, feed, tmp_path):
    """A screen that cannot be saved does not end the watch."""
    board = Board("tap eth1", feed, screenshots=tmp_path / "nowhere" / HOSTILE[:9])
    async with board.run_test(size=(80, 24), notifications=True) as pilot:
        await show(pilot, feed, make.snapshot())
        await pilot.press("s")
        assert "not saved" in next(iter(board._notifications)).message


async def test_hostile_names_do_nothing(make, feed):
    """Names that hold markup or control codes are shown as text, on every page."""
    snapshot = make.snapshot(
        site=HOSTILE,
        tap=make.tap(name=HOSTILE, remarks=(HOSTILE, "\x00" * 999)),
        links=(make.link(HOSTILE, framing=HOSTILE, planned_call=HOSTILE), make.link()),
        calls=(make.call(1, codec=HOSTILE, crosses=(HOSTILE,), here=HOSTILE, there=HOSTILE,
                         streams=(make.stream(HOSTILE, HOSTILE, codec=HOSTILE, media=HOSTILE),)),),
        alarms=(make.alarm(subject=HOSTILE, link=HOSTILE, text=HOSTILE),),
        cleared=(make.alarm(subject=HOSTILE, text=HOSTILE, cleared=0),),
    )  # fmt: skip
    board = Board(HOSTILE, feed, cautions=[HOSTILE])
    async with board.run_test(size=(80, 24)) as pilot:
        await show(pilot, feed, snapshot)
        feed.finished(HOSTILE)
        for key in ("x", "enter", "escape", "a", "t", "tab", "l"):
            await pilot.press(key)
            assert all(row.isprintable() for row in screen_lines(board))
        await pilot.resize_terminal(160, 45)
        assert all(row.isprintable() for row in screen_lines(board))
        assert board.is_running


async def test_every_theme_has_the_colours_that_are_asked_for(make, feed):
    """No theme that the palette offers lacks a colour that the stylesheet names."""
    board = Board("tap eth1", feed)
    async with board.run_test(size=(80, 24)) as pilot:
        await show(pilot, feed, make.snapshot(27, alarms=(make.alarm(),)))
        for theme in board.available_themes:
            board.theme = theme
            board.stylesheet.set_variables(board.get_css_variables())
            board.stylesheet.reparse()
        await pilot.pause()
        assert "over 3" in "\n".join(screen_lines(board))


async def test_without_colour_the_words_remain(make, feed, monkeypatch):
    """NO_COLOR takes the colours and leaves every sign."""
    monkeypatch.setenv("NO_COLOR", "1")
    board = Board("tap eth1", feed)
    async with board.run_test(size=(80, 24)) as pilot:
        await show(pilot, feed, make.snapshot(27, alarms=(make.alarm(),)))
        shown = "\n".join(screen_lines(board))
        assert "over 3" in shown
        assert "!!  major" in shown
        colours = {
            s.style.color for strip in board.screen._compositor.render_strips() for s in strip
        }
        assert all(c is None or len(set(c.triplet or (0,))) == 1 for c in colours)


async def test_nothing_is_painted_that_did_not_change(make, feed, monkeypatch):
    """A snapshot that shows the same again costs no painting."""
    board = Board("tap eth1", feed)
    async with board.run_test(size=(80, 24)) as pilot:
        await show(pilot, feed, make.snapshot())
        painted = []
        monkeypatch.setattr(Links, "refresh_line", lambda self, y: painted.append(y))
        monkeypatch.setattr(Calls, "refresh_line", lambda self, y: painted.append(y))
        await show(pilot, feed, make.snapshot())
        assert painted == []
        await show(pilot, feed, make.snapshot(20))
        assert painted
