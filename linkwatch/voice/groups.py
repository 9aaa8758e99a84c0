"""Packets that have been sorted by what they belong to, so that sums of each run are one call."""

from dataclasses import dataclass
from typing import Any, TypeVar, cast

import numpy as np
import numpy.typing as npt

from linkwatch.frames import Longs
from linkwatch.voice.headers import Mask

Column = TypeVar("Column", bound=npt.NDArray[Any])


@dataclass(frozen=True, slots=True)
class Groups:
    """Runs of packets with the same owner.

    Attributes:
        owner: Whose packets each run holds (a row of some table).
        start: Where the run begins.
        size: How many packets it has.
    """

    owner: Longs
    start: Longs
    size: Longs

    @classmethod
    def of(cls, owner: Longs) -> "Groups":
        """Returns the runs of a sorted column, which must not be empty."""
        start = np.flatnonzero(np.concatenate(([True], owner[1:] != owner[:-1])))
        return cls(owner[start], start, np.diff(start, append=len(owner)))

    @property
    def last(self) -> Longs:
        """Where each run's last packet is."""
        return self.start + self.size - 1

    def total(self, column: Column) -> Column:
        """Returns the sum of each run."""
        return cast("Column", np.add.reduceat(column, self.start))

    def each(self, column: Column) -> Column:
        """Returns a column of the runs spread over their packets."""
        return cast("Column", np.repeat(column, self.size))

    def all(self, column: Mask) -> Mask:
        """Whether it holds for every packet of each run."""
        answer: Mask = np.logical_and.reduceat(column, self.start)
        return answer

    def before(self, column: Longs, carried: Longs) -> Longs:
        """Returns each packet's predecessor in its run; `carried` stands before the first."""
        previous = np.empty_like(column)
        previous[1:] = column[:-1]
        previous[self.start] = carried
        return previous


def grouping(owner: Longs) -> Longs:
    """Returns the order that brings packets of one owner together, each in order of arrival.

    Owners are 0 to 65535, which lets numpy sort them by their digits.
    """
    return np.argsort(owner.astype(np.uint16), kind="stable")
