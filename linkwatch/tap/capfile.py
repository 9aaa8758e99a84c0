"""Capture files: pcap and pcapng, plain or gzipped, from a file, a pipe or standard input.

A capture is read in pieces, so memory is flat in its length, and a file that grows or shrinks
meanwhile does no harm.
"""

import gzip
import stat
import sys
import zlib
from collections.abc import Iterator
from io import BufferedReader
from pathlib import Path
from typing import cast

import numpy as np

from linkwatch.errors import CaptureError
from linkwatch.frames import CounterReading, FrameBatch, LinkType, TapStatistics
from linkwatch.tap.records import LONGEST_BLOCK, Frames, format_of, known_link_type

PIECE = 4 << 20  # octets read at once: they stay in the processor's cache until they are used
HEAD = 24  # octets that tell the format
SLACK = 64  # octets behind a piece that a head may be gathered into
GROUPED_NS = 100_000_000  # ticks lie on such whiles' ends, unless somebody asks for odd ones
GZIP_MAGIC = b"\x1f\x8b"
STANDARD_INPUT = "-"


class CaptureFile:
    """A capture file as a tap.

    Args:
        path: The file, a named pipe, or "-" for standard input.

    Raises:
        CaptureError: It cannot be read, or is no capture.
    """

    def __init__(self, path: Path) -> None:
        self._name = "standard input" if str(path) == STANDARD_INPUT else str(path)
        self._file, self._size = _open(path, self._name)
        self._unpacked: gzip.GzipFile | BufferedReader = self._file
        # One buffer for all pieces: fresh memory for each would cost as much as the reading.
        self._buffer = bytearray(PIECE + SLACK)
        self._filled = 0
        self._frames = self._octets = self._read = 0
        self._until = 0
        self._remarks: list[str] = []
        self._closed = False
        if self._file.peek(2)[:2] == GZIP_MAGIC:
            self._unpacked = gzip.GzipFile(fileobj=self._file)
        head = self._head()
        try:
            self._format, self._records_at = format_of(head, self._name)
        except CaptureError:
            self.close()
            raise
        self._keep(self._records_at)

    def _head(self) -> bytes:
        """Reads as far as it takes to tell the format."""
        while self._filled < HEAD and self._fill(HEAD):
            pass
        return bytes(memoryview(self._buffer)[: self._filled])

    @property
    def name(self) -> str:
        """The file's name."""
        return Path(self._name).name

    @property
    def progress(self) -> float:
        """How much of the file is read, 0 to 1; 0 where its length is not known."""
        return min(1.0, self._read / self._size) if self._size else 0.0

    def batches(self) -> Iterator[FrameBatch]:
        """Yields the frames in the order of the file, a few MB at a time."""
        begins = self._records_at
        while not self._closed:
            more = self._fill(len(self._buffer) - SLACK)
            place, piece = 0, memoryview(self._buffer)[: self._filled]
            while True:
                found = self._format.find(piece, place)
                yield from self._batches(found.frames)
                if found.fault or found.used == place:
                    break
                place = found.used
            place, rest = found.used, self._filled - found.used
            if found.fault or not more or rest > LONGEST_BLOCK:
                self._conclude(begins + place, found.fault, rest)
                return
            begins += place
            self._keep(place)

    def counters(self) -> CounterReading | None:
        """Returns None: a capture knows nothing of interface counters."""
        return None

    def statistics(self) -> TapStatistics:
        """Returns what was read so far."""
        return TapStatistics(self._frames, self._octets, remarks=tuple(self._remarks))

    def close(self) -> None:
        """Closes the file."""
        self._closed = True
        self._file.close()

    def _fill(self, limit: int) -> bool:
        """Reads on into the buffer, up to `limit`; a pipe only as far as there is something.

        Returns whether anything came. Where the file cannot be read on, that is its end, with a
        remark.
        """
        room = memoryview(self._buffer)[:limit]
        before = self._filled
        try:
            while self._filled < len(room):
                got = self._unpacked.readinto1(room[self._filled :])
                self._filled += got
                if not got or not self._size:
                    break
            if self._size:
                self._read = self._file.tell()
        except (OSError, EOFError, zlib.error, ValueError) as error:
            if not self._closed:
                self._remarks.append(f"{self._name} cannot be read to its end: {error}")
            return False
        return self._filled > before

    def _keep(self, place: int) -> None:
        """Moves what is not used yet to the front, into a larger buffer where it fills this one."""
        rest = bytes(memoryview(self._buffer)[place : self._filled])
        if len(rest) + SLACK >= len(self._buffer):
            self._buffer = bytearray(2 * len(self._buffer))
        self._buffer[: len(rest)] = rest
        self._filled = len(rest)

    def _batches(self, frames: Frames) -> Iterator[FrameBatch]:
        """Yields what was found as batches of one link type each."""
        if not len(frames.at):
            return
        octets = np.frombuffer(self._buffer, np.uint8)
        frames = _grouped(frames)
        changes = (np.flatnonzero(np.diff(frames.link_type)) + 1).tolist()
        so_far = np.maximum.accumulate(frames.times)
        to_come = np.minimum.accumulate(frames.times[::-1])[::-1]
        for start, stop in zip((0, *changes), (*changes, len(frames.at)), strict=True):
            part = slice(start, stop)
            self._frames += stop - start
            self._octets += int(frames.original[part].sum())
            until = int(so_far[stop - 1]) + 1
            if stop < len(to_come):
                until = min(until, int(to_come[stop]))
            self._until = max(self._until, until)
            yield FrameBatch(
                octets,
                frames.at[part],
                frames.captured[part],
                frames.original[part],
                frames.times[part],
                LinkType(int(frames.link_type[start])),
                self._until,
            )

    def _conclude(self, place: int, fault: str, rest: int) -> None:
        """Says what of the file could not be used."""
        if fault and not self._frames:
            raise CaptureError(self._name, got=f"{fault} at octet {place}", wanted="a capture")
        if fault:
            self._remarks.append(
                f"damaged at octet {place} ({fault}); the frames before it are used"
            )
        elif rest:
            self._remarks.append(
                f"cut off in the middle of a frame at octet {place}; the frames before it are used"
            )
        unreadable = self._format.left_out
        if unreadable and not self._frames:
            known_link_type(min(unreadable), self._name)
        self._remarks += [
            f"{frames} frames of link type {number} cannot be read and are left out"
            for number, frames in sorted(unreadable.items())
        ]
        if self._format.damaged:
            self._remarks.append(f"{self._format.damaged} damaged frames are left out")


def _grouped(frames: Frames) -> Frames:
    """Returns frames of several link types so that those of a short while lie together by type.

    Otherwise interfaces that take turns would make a batch of every frame.
    """
    if (frames.link_type == frames.link_type[0]).all():
        return frames
    while_of = np.maximum.accumulate(frames.times) // GROUPED_NS
    order = np.lexsort((frames.link_type, while_of))
    return Frames(*(column[order] for column in frames))


def _open(path: Path, name: str) -> tuple[BufferedReader, int]:
    """Returns the file and its length, 0 where it has none."""
    if str(path) == STANDARD_INPUT:
        return cast("BufferedReader", sys.stdin.buffer), 0
    try:
        kind = path.stat()
        if stat.S_ISDIR(kind.st_mode):
            raise CaptureError(name, got="a directory", wanted="a capture file")
        file = path.open("rb")
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or "a name that no file can have"
        raise CaptureError(name, got=reason.lower()) from None
    return file, kind.st_size if stat.S_ISREG(kind.st_mode) else 0
