"""The dashboard in a real terminal: started, looked at, resized and left by keys."""

import shutil
import subprocess
import sys
import time
import uuid

import pytest

WAIT_S = 30


@pytest.fixture
def terminal():
    """A terminal of 80x24 that a test can type into and read."""
    if not shutil.which("tmux"):
        pytest.skip("needs tmux")
    made = Terminal()
    yield made
    made.tmux("kill-server", check=False)


class Terminal:
    def __init__(self):
        self._socket = f"linkwatch-{uuid.uuid4().hex}"

    def tmux(self, *words, check=True):
        asked = ["tmux", "-L", self._socket, *words]
        return subprocess.run(asked, check=check, capture_output=True, text=True).stdout

    def start(self, *words):
        command = " ".join([sys.executable, "-m", "linkwatch", *words])
        size = ["-x", "80", "-y", "24"]
        self.tmux("new-session", "-d", *size, f"{command}; echo left with $?; sleep 60")

    def screen_with(self, text):
        """Returns the screen once it shows this text."""
        end = time.monotonic() + WAIT_S
        while time.monotonic() < end:
            screen = self.tmux("capture-pane", "-p")
            if text in screen:
                return screen
            time.sleep(0.1)
        raise AssertionError(f"{text!r} does not show:\n{screen}")

    def press(self, *keys):
        self.tmux("send-keys", *keys)


def test_the_demo_runs_in_a_terminal_and_ends_by_a_key(terminal):
    """The cautions come first, then the budget, calls that come up, help, and a clean end."""
    terminal.start("demo", "--speed", "20")
    assert "emergency call" in terminal.screen_with("Before you watch")
    terminal.press("Enter")
    screen = terminal.screen_with("room")
    assert "to site" in screen
    assert "G729" in terminal.screen_with("10.20.1.")
    terminal.press("?")
    terminal.screen_with("leave")
    terminal.press("Escape")
    terminal.screen_with("10.20.1.")
    terminal.tmux("resize-window", "-x", "60", "-y", "16")
    terminal.screen_with("to site")
    terminal.press("q")
    terminal.screen_with("left with 0")


def test_a_capture_can_be_seen_on_the_board(terminal, tmp_path):
    """`read --board` shows a capture in its own time, and says when it has ended."""
    import dpkt
    from wirebuild import both_ways

    with (tmp_path / "call.pcap").open("wb") as file:
        writer = dpkt.pcap.Writer(file, nano=True)
        for seen, octets in both_ways(packets=200):
            writer.writepkt_time(octets, seen / 1e9)
    terminal.start("read", str(tmp_path / "call.pcap"), "--board", "--speed", "4")
    terminal.screen_with("Before you watch")
    terminal.press("Enter")
    assert "PCMU" in terminal.screen_with("end of the source")
    terminal.press("q")
    terminal.screen_with("left with 0")
