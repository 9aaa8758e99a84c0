"""Alarms: raised when a condition has held for a while, cleared when it has gone for a while."""

from collections import deque
from collections.abc import Iterable
from dataclasses import dataclass, replace
from enum import Enum, auto

from linkwatch.watch.snapshot import Alarm, Kind, Severity

CLEARED_KEPT = 50  # shown as cleared a short while ago
WORST_FIRST = {severity: rank for rank, severity in enumerate(Severity)}


class Sign(Enum):
    """What a look at a condition says."""

    HOLDS = auto()
    NEAR = auto()  # not over the limit, but too near to say that it is over: hysteresis
    GONE = auto()


@dataclass(frozen=True, slots=True)
class Condition:
    """Something that is to be told, as it looks now.

    Attributes:
        kind, severity, link, subject, text: As in `Alarm`.
        sign: HOLDS or NEAR; a condition that has gone is simply not reported any more.
        at_once: Whether to raise it without waiting, because it may be over in a moment.
    """

    kind: Kind
    severity: Severity
    link: str
    subject: str
    text: str
    sign: Sign = Sign.HOLDS
    at_once: bool = False

    @property
    def key(self) -> tuple[Kind, str, str]:
        """What makes it the same condition the next time."""
        return self.kind, self.link, self.subject


class State(Enum):
    """Where an alarm stands."""

    CALM = auto()
    PENDING = auto()  # holds, but not yet for long enough
    RAISED = auto()
    CLEARING = auto()  # has gone, but not yet for long enough


# From each state, by what is seen: the next state at once, and the one after the hold time.
TRANSITIONS: dict[tuple[State, Sign], tuple[State, State]] = {
    (State.CALM, Sign.HOLDS): (State.PENDING, State.PENDING),
    (State.CALM, Sign.NEAR): (State.CALM, State.CALM),
    (State.PENDING, Sign.HOLDS): (State.PENDING, State.RAISED),
    (State.PENDING, Sign.NEAR): (State.CALM, State.CALM),
    (State.PENDING, Sign.GONE): (State.CALM, State.CALM),
    (State.RAISED, Sign.HOLDS): (State.RAISED, State.RAISED),
    (State.RAISED, Sign.NEAR): (State.RAISED, State.RAISED),
    (State.RAISED, Sign.GONE): (State.CLEARING, State.CLEARING),
    (State.CLEARING, Sign.HOLDS): (State.RAISED, State.RAISED),
    (State.CLEARING, Sign.NEAR): (State.RAISED, State.RAISED),
    (State.CLEARING, Sign.GONE): (State.CLEARING, State.CALM),
}


@dataclass(slots=True)
class _Watched:
    state: State
    since: int  # when it came into this state, nanoseconds
    alarm: Alarm | None = None


class AlarmBook:
    """The alarms that stand and have stood.

    Args:
        hold_s: Seconds that a condition must hold before it is raised, and be gone before it is
            cleared.
        keep: How many cleared alarms to keep; None keeps all.
    """

    def __init__(self, hold_s: float, keep: int | None = None) -> None:
        self._hold_ns = round(hold_s * 1e9)
        self._watched: dict[tuple[Kind, str, str], _Watched] = {}
        self._cleared: deque[Alarm] = deque(maxlen=keep)

    def look(self, conditions: Iterable[Condition], now: int) -> None:
        """Takes in everything that is to be told at `now` (nanoseconds)."""
        seen = {condition.key: condition for condition in conditions}
        for key, condition in seen.items():
            watched = self._watched.get(key)
            if watched is None:
                if condition.sign is Sign.NEAR:
                    continue
                watched = self._watched[key] = _Watched(State.CALM, now)
            self._move(watched, condition.sign, now, condition)
        for key in [key for key in self._watched if key not in seen]:
            self._move(self._watched[key], Sign.GONE, now, None)
        for key in [key for key, w in self._watched.items() if w.state is State.CALM]:
            del self._watched[key]

    def _move(self, watched: _Watched, sign: Sign, now: int, condition: Condition | None) -> None:
        """Goes from state to state as far as what is seen allows."""
        hold = 0 if condition and condition.at_once else self._hold_ns
        while True:
            at_once, in_time = TRANSITIONS[watched.state, sign]
            state = in_time if now - watched.since >= hold else at_once
            if state is watched.state:
                return
            if state is State.RAISED and watched.alarm is None and condition:
                c = condition
                watched.alarm = Alarm(c.kind, c.severity, c.link, c.subject, c.text, raised=now)
            if state is State.CALM and watched.alarm:
                self._cleared.append(replace(watched.alarm, cleared=now))
            watched.state, watched.since = state, now
            if state is State.CALM:
                return

    def standing(self) -> tuple[Alarm, ...]:
        """Returns the alarms that stand, worst first, then oldest."""
        alarms = [watched.alarm for watched in self._watched.values() if watched.alarm]
        return tuple(sorted(alarms, key=lambda alarm: (WORST_FIRST[alarm.severity], alarm.raised)))

    def cleared(self) -> tuple[Alarm, ...]:
        """Returns the alarms cleared last, latest first."""
        return tuple(self._cleared)[: -CLEARED_KEPT - 1 : -1]

    def all(self) -> tuple[Alarm, ...]:
        """Returns every alarm that was kept, in the order in which they were raised."""
        return tuple(sorted((*self._cleared, *self.standing()), key=lambda alarm: alarm.raised))
