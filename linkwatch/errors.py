"""The errors a person may see, each with its exit status.

    LinkwatchError                  something a person can put right
    ├── InputError           (2)    wrong usage, or a file that cannot be used
    │   ├── PlanError        (2)    a plan file: names file, line and key
    │   └── CaptureError     (2)    a capture file
    ├── TapError             (2)    a port that does not exist or cannot be opened
    └── PermissionMissing    (3)    the right to read packets is missing

Each error is one line: what it is about, what was found, what would be right, and the remedy.
Anything else that escapes is a fault of this program.
"""

from typing import ClassVar


def one_line(text: str) -> str:
    """Returns the text as one line without control characters, whatever it quotes."""
    return " ".join("".join(c if c.isprintable() else " " for c in text).split())


class LinkwatchError(Exception):
    """Something a person can put right, told in one line.

    Args:
        what: The thing the error is about (a file and line, an option, a port).
        got: What was found there.
        wanted: What would have been right.
        remedy: What to do now, as a sentence.
    """

    exit_status: ClassVar[int] = 2

    def __init__(self, what: str, *, got: str = "", wanted: str = "", remedy: str = "") -> None:
        super().__init__(what, got, wanted, remedy)
        self.what, self.got, self.wanted, self.remedy = what, got, wanted, remedy

    def __str__(self) -> str:
        line = self.what
        if self.got:
            line += f": {self.got}"
        if self.wanted:
            line += f"; wanted {self.wanted}"
        if self.remedy:
            line += f". {self.remedy}"
        return one_line(line)


class InputError(LinkwatchError):
    """Wrong usage, or a file that cannot be used."""


class PlanError(InputError):
    """A plan file that cannot be used; `what` names file, line and key."""


class CaptureError(InputError):
    """A capture file that cannot be read."""


class TapError(LinkwatchError):
    """A port that does not exist, is down, or cannot be opened."""


class PermissionMissing(LinkwatchError):  # noqa: N818 - it is a state of affairs, and reads as one
    """The right to read packets is missing; the remedy says how to get it."""

    exit_status: ClassVar[int] = 3
