"""The algorithms of RFC 3550, written plainly after its appendix A, to hold the engine against.

It shares no code with the engine. Where docs/figures.md settles what the RFC leaves open, this
follows: a jump that a second packet confirms begins a segment with the first of the two, different
numbers are counted, and jitter begins again where the sequence or the timestamps jump.
"""

RTP_SEQ_MOD = 1 << 16
MAX_DROPOUT = 3000
MAX_MISORDER = 100


class Source:
    """One source's sequence numbers (A.1, A.3), a packet at a time."""

    def __init__(self, seq):
        self.packets = self.strays = self.duplicates = self.reordered = 0
        self.expected_before = self.received_before = self.different_before = 0
        self.a3_expected_before = 0
        self.segment = 0
        self.init_seq(seq)

    def init_seq(self, seq):
        self.base_seq = self.max_seq = seq
        self.bad_seq = RTP_SEQ_MOD + 1
        self.cycles = 0
        self.received = 0
        self.numbers = set()

    def update_seq(self, seq):
        """Returns whether the packet is the first with its number; None for one rejected."""
        self.packets += 1
        udelta = (seq - self.max_seq) % RTP_SEQ_MOD
        late = False
        if udelta < MAX_DROPOUT:
            if seq < self.max_seq:
                self.cycles += RTP_SEQ_MOD
            self.max_seq = seq
        elif udelta <= RTP_SEQ_MOD - MAX_MISORDER:
            if seq != self.bad_seq:
                self.bad_seq = (seq + 1) % RTP_SEQ_MOD
                self.strays += 1
                return None
            self.close_segment()
            self.init_seq(seq)
            self.segment += 1
            self.strays -= 1
            # The packet that announced the jump belongs to the new segment.
            self.base_seq = seq - 1
            self.received = 1
            self.numbers.add(seq - 1)
        else:
            late = True
        extended = self.cycles + seq
        if extended > self.cycles + self.max_seq:
            extended -= RTP_SEQ_MOD
        self.received += 1
        if extended in self.numbers:
            self.duplicates += 1
            return False
        self.numbers.add(extended)
        self.reordered += late
        return True

    def close_segment(self):
        self.expected_before += max(self.numbers) - min(self.numbers) + 1
        self.a3_expected_before += self.cycles + self.max_seq - self.base_seq + 1
        self.received_before += self.received
        self.different_before += len(self.numbers)

    @property
    def expected(self):
        return self.expected_before + max(self.numbers) - min(self.numbers) + 1

    @property
    def lost(self):
        return self.expected - self.different_before - len(self.numbers)

    @property
    def lost_a3(self):
        expected = self.a3_expected_before + self.cycles + self.max_seq - self.base_seq + 1
        return expected - self.received_before - self.received


class Jitter:
    """Interarrival jitter (6.4.1, A.8) in timestamp units, as a real number."""

    def __init__(self, clock_hz):
        self.clock_hz = clock_hz
        self.previous = None
        self.now = self.total = self.highest = 0.0
        self.count = 0

    def take(self, arrival_ns, timestamp, segment):
        previous, self.previous = self.previous, (arrival_ns, timestamp, segment)
        if previous is None:
            return
        ticks = (timestamp - previous[1] + (1 << 31)) % (1 << 32) - (1 << 31)
        d = abs((arrival_ns - previous[0]) * self.clock_hz / 1e9 - ticks)
        if segment != previous[2] or d >= self.clock_hz:
            self.now = 0.0
            return
        self.now += (d - self.now) / 16
        self.total += self.now
        self.count += 1
        self.highest = max(self.highest, self.now)


def statistics(packets, clock_hz=8000):
    """Returns (Source, Jitter) after packets of (arrival in ns, sequence, timestamp)."""
    source, jitter = Source(packets[0][1]), Jitter(clock_hz)
    for arrival_ns, sequence, timestamp in packets:
        if source.update_seq(sequence):
            jitter.take(arrival_ns, timestamp, source.segment)
    return source, jitter
