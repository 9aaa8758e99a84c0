"""The admission budget of one direction of a link: calls, kbit/s, reserve, room left."""

import math
from dataclasses import dataclass

DUST_CALLS = 1e-6  # sums of many costs are not exact to the last bit; this share of a call is none


@dataclass(frozen=True, slots=True)
class Budget:
    """What voice may use in one direction.

    Attributes:
        calls: Calls that may be up, the reserve among them, or None without such a limit.
        kbps: kbit/s that they may cost, or None without such a limit.
        reserve_calls: Planned calls of these that stay free, for emergency calls above all.
        call_kbps: What one planned call costs, one direction; more than 0.
    """

    calls: int | None
    kbps: float | None
    reserve_calls: int
    call_kbps: float

    @property
    def reserve_kbps(self) -> float:
        """What the reserve comes to, kbit/s."""
        return self.reserve_calls * self.call_kbps

    def calls_that_fit(self, kbps: float) -> int:
        """Returns how many planned calls fit into so many kbit/s."""
        return max(0, math.floor(kbps / self.call_kbps + DUST_CALLS))

    def room(self, calls_up: int, reserved_kbps: float) -> int | None:
        """Returns how many planned calls still fit beside the reserve, or None without a limit.

        Args:
            calls_up: Calls that are up.
            reserved_kbps: What admission counts for them, kbit/s.
        """
        rooms = []
        if self.calls is not None:
            rooms.append(max(0, self.calls - self.reserve_calls - calls_up))
        if self.kbps is not None:
            rooms.append(self.calls_that_fit(self.kbps - self.reserve_kbps - reserved_kbps))
        return min(rooms, default=None)
