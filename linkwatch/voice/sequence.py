"""Following the sequence numbers of one source by RFC 3550 A.1 and A.3, a packet at a time.

This is the definition. `streams` takes a short cut where every number of a batch advances, which
is nearly always; whatever else happens on a network is followed here.

Extended numbers grow for ever: 16 bits of sequence number and above them a cycle count. A restart
begins a new segment well above the old one, so that no two packets of a source share an extended
number unless one is a copy of the other.
"""

from dataclasses import dataclass

from linkwatch.frames import Longs

MODULUS = 1 << 16
MAX_DROPOUT = 3000  # RFC 3550 A.1: a minute of packets at 50 a second
MAX_MISORDER = 100  # RFC 3550 A.1: two seconds of them
MEMORY = 128  # numbers remembered to know a copy; a power of two, not below MAX_MISORDER
START = MODULUS  # the first segment's cycle: leaves room below for packets that come late


# What a packet's number says, where it does not advance on those before it.
LATE = 0  # a new number, but below the highest
COPY = -1  # a number already received
STRAY = -2  # a jump that nothing has confirmed: not of the stream, until a second one does


@dataclass(slots=True)
class Numbering:
    """The sequence numbers of one source up to now.

    Attributes:
        memory: MEMORY extended numbers received lately, each at its value modulo MEMORY.
        highest: Highest extended number of the present segment.
        lowest: Lowest of them; `base` is the first received, which need not be the lowest.
        received: Packets of the present segment, copies included.
        different: Different numbers received, all segments.
        before: Numbers expected in the segments before, `highest - lowest + 1` of each.
        before_a3: A.3's loss of the segments before.
        copies, late, strays: Packets by verdict, all segments.
        awaited: The number that would confirm a jump (A.1's `bad_seq`), or -1.
        segment: How many times the numbering has begun again.
    """

    memory: Longs
    highest: int
    lowest: int
    base: int
    received: int = 0
    different: int = 0
    before: int = 0
    before_a3: int = 0
    copies: int = 0
    late: int = 0
    strays: int = 0
    awaited: int = -1
    segment: int = 0

    @classmethod
    def beginning_with(cls, sequence: int, memory: Longs) -> "Numbering":
        """Returns the numbering of a source whose first packet has this number, not yet taken."""
        first = START + sequence
        return cls(memory, highest=first - 1, lowest=first, base=first)

    @property
    def expected(self) -> int:
        """Packets expected: highest - lowest + 1, summed over the segments."""
        return self.before + self.highest - self.lowest + 1

    @property
    def lost(self) -> int:
        """Packets lost: those expected less the different ones received."""
        return self.expected - self.different

    @property
    def lost_a3(self) -> int:
        """A.3's figure: copies count as received, and the first packet as the lowest."""
        return self.before_a3 + self.highest - self.base + 1 - self.received

    def take(self, sequence: int) -> int:
        """Counts one packet by its number (0 to 65535).

        Returns by how much it advances on the highest before it (1 or more), or LATE, COPY or
        STRAY.
        """
        ahead = (sequence - self.highest) % MODULUS
        if MAX_DROPOUT <= ahead <= MODULUS - MAX_MISORDER:
            if sequence != self.awaited:
                self.awaited = (sequence + 1) % MODULUS
                self.strays += 1
                return STRAY
            self._begin_again(sequence)
            ahead = 1
        elif ahead > MODULUS - MAX_MISORDER:
            ahead -= MODULUS
        number = self.highest + ahead
        self.received += 1
        if not self._remember(number):
            self.copies += 1
            return COPY
        self.different += 1
        self.lowest = min(self.lowest, number)
        if number < self.highest:
            self.late += 1
            return LATE
        self.highest = number
        return ahead

    def _begin_again(self, sequence: int) -> None:
        """Begins a segment with the stray that announced it and the number that confirms it."""
        self.before = self.expected
        self.before_a3 = self.lost_a3
        cycle = (self.highest // MODULUS + 2) * MODULUS
        self.highest = self.lowest = self.base = cycle + sequence - 1
        self.segment += 1
        self.strays -= 1
        self.received = 1
        self.different += 1
        self._remember(self.lowest)

    def _remember(self, number: int) -> bool:
        """Whether the number is new; it is not the next time."""
        place = number % MEMORY
        if self.memory[place] == number:
            return False
        self.memory[place] = number
        return True
