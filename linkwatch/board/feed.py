"""Where the board's snapshots come from."""

from collections.abc import Callable
from typing import Protocol

from linkwatch.watch.snapshot import Snapshot


class Feed(Protocol):
    """Gives the board one snapshot per tick, from a thread of its own."""

    def start(self, publish: Callable[[Snapshot], None], finished: Callable[[str], None]) -> None:
        """Begins to work, and returns at once.

        Args:
            publish: To be called with each snapshot, from any thread. It returns at once.
            finished: To be called once, with a line that says why no snapshot will follow: the
                end of a capture, or an error.
        """
        ...

    def stop(self) -> None:
        """Ends the work and waits for its thread, for a limited time. May be called twice."""
        ...
