"""The README's promises that a test can hold it to."""

import re
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text()


def test_its_two_lines_are_single_commands():
    """One line starts the demo, one passes the tests; each does all the set-up."""
    lines = re.findall(r"^    (python3 -m venv .*)$", README, re.MULTILINE)
    assert len(lines) == 2
    assert lines[0].endswith("linkwatch demo")
    assert lines[1].endswith("pytest")


def test_every_file_it_names_is_there():
    """Links and pictures lead somewhere."""
    for target in re.findall(r"\]\(([^)#]+)\)", README):
        assert (ROOT / target).exists(), target


def test_every_command_it_names_has_help():
    """Whatever the README calls answers `--help`."""
    commands = "watch|demo|read|log|count|cost|plan|taps|bench"
    for command in set(re.findall(f"linkwatch ({commands})", README)):
        asked = [sys.executable, "-m", "linkwatch", command, "--help"]
        assert subprocess.run(asked, capture_output=True, check=True).stdout
