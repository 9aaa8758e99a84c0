"""`linkwatch bench`: our speed as ratios, beside other decoders, in one run on one machine.

Absolute figures of a busy machine say little; ratios taken in turns within one run say more. The
slow decoders read the beginning of the same capture, and are counted by the packet.
"""

import json
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from itertools import islice
from multiprocessing import get_context
from pathlib import Path
from typing import NamedTuple

import numpy as np

from linkwatch.errors import InputError
from linkwatch.frames import Octets
from linkwatch.plan.planfile import default_plan
from linkwatch.run import read_capture

ROUNDS = 5
WARM_UP_PACKETS = 10
MOST_PACKETS = {"read": sys.maxsize, "dpkt": 50_000, "scapy": 2_000}
PCMU, G729 = 0, 18
PCMU_OCTETS, G729_OCTETS = 160, 20  # of 20 ms (RFC 3551 table 1 and 4.5.6)
ETHERNET_OCTETS, IP_OCTETS, RECORD_OCTETS = 14, 20 + 8 + 12, 16
LONGEST_OCTETS = RECORD_OCTETS + ETHERNET_OCTETS + IP_OCTETS + PCMU_OCTETS
WRITTEN_AT_ONCE = 100_000
START_S = 1_800_000_000
ASK_PEAK = """
import resource, subprocess, sys
subprocess.run(sys.argv[1:], stdout=subprocess.DEVNULL, check=True)
print(resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss)
"""


class Bench(NamedTuple):
    """What was measured.

    Attributes:
        streams, packets: Of the capture.
        read_ns: `linkwatch read`, nanoseconds a packet, median.
        others: The other decoders the same, by name.
        samples: Packets that each of them reads, from the beginning of the capture.
        ratios: How many times faster `read` is than each: median over the rounds.
        help_s: Whole-process time of `linkwatch --help`, seconds, median.
        read_mb: Resident memory of a process that reads the capture, at its peak.
        missing: Decoders that are not installed.
    """

    streams: int
    packets: int
    read_ns: float
    others: dict[str, float]
    samples: dict[str, int]
    ratios: dict[str, float]
    help_s: float
    read_mb: float
    missing: tuple[str, ...]


def run_bench(streams: int, packets: int) -> Bench:
    """Measures everything, on a capture of so many streams and packets made for it."""
    if (
        not 1 <= streams <= 30_000
        or not max(streams * 10, MOST_PACKETS["dpkt"]) <= packets <= 20_000_000
    ):
        raise InputError(
            "bench",
            got=f"{streams} streams of {packets} packets",
            wanted="1 to 30,000 streams, 10 packets of each and 50,000 to 20 million in all",
        )
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "bench.pcap"
        write_capture(path, streams, packets)
        times: dict[str, list[float]] = {name: [] for name in DECODERS}
        for _ in range(ROUNDS):
            for name, of in times.items():
                of += _in_its_own_process(name, path)
        others = {name: statistics.median(of) for name, of in times.items() if of}
        read_ns = others.pop("read")
        ratios = {
            name: statistics.median(a / b for a, b in zip(times[name], times["read"], strict=True))
            for name in others
        }
        return Bench(
            streams,
            packets,
            read_ns,
            others,
            {name: MOST_PACKETS[name] for name in others},
            ratios,
            _help_s(),
            _read_mb(path),
            tuple(name for name in DECODERS if not times[name]),
        )


def print_bench(bench: Bench, *, as_json: bool) -> str:
    """Returns what was measured: ratios first."""
    if as_json:
        return json.dumps(bench._asdict())
    lines = [f"a capture of {bench.streams} streams, {bench.packets} packets, PCMU and G729", ""]
    lines += [
        f"read is {ratio:6.1f} times as fast as {name}" for name, ratio in bench.ratios.items()
    ]
    lines += [
        f"{name} is not installed: pip install {name}, then run it again" for name in bench.missing
    ]
    lines += ["", f"read    {bench.read_ns:9.0f} ns a packet"]
    lines += [
        f"{name:7s} {ns:9.0f} ns a packet, over the first {bench.samples[name]}"
        for name, ns in bench.others.items()
    ]
    lines += [
        "",
        f"--help  {bench.help_s:9.3f} s",
        f"read    {bench.read_mb:9.0f} MB resident at its peak",
    ]
    return "\n".join(lines)


def write_capture(path: Path, streams: int, packets: int) -> None:
    """Writes a pcap file of so many streams, spread evenly over time.

    Two streams are a call; calls are PCMU and G729 in turns, 20 ms a packet.
    """
    each = -(-packets // streams)
    at_once = max(1, WRITTEN_AT_ONCE // streams)
    with path.open("wb") as file:
        file.write(np.array([0xA1B2C3D4, 0x00040002, 0, 0, 65535, 1], "<u4").tobytes())
        for first in range(0, each, at_once):
            file.write(_records(streams, first, min(at_once, each - first)).tobytes())


def _records(streams: int, first: int, count: int) -> Octets:
    """Returns so many packets of every stream as records of a capture, in the order of time."""
    stream = np.tile(np.arange(streams), count)
    number = np.repeat(np.arange(first, first + count), streams)
    micro = number * 20_000 + stream * 20_000 // streams
    call, back = stream // 2, stream % 2 == 1
    codec = np.where(call % 2, G729, PCMU)
    packet = IP_OCTETS + np.where(codec == G729, G729_OCTETS, PCMU_OCTETS)
    frame = ETHERNET_OCTETS + packet
    rows = np.zeros((streams * count, LONGEST_OCTETS), np.uint8)
    rows[:, 16:28] = np.frombuffer(bytes.fromhex("02005e10000102005e100002"), np.uint8)
    rows[:, 28:36] = np.frombuffer(bytes.fromhex("080045b800000000"), np.uint8)
    rows[:, 36:40] = np.frombuffer(bytes.fromhex("40003f11"), np.uint8)
    rows[:, 58], rows[:, 59] = 0x80, codec
    phone, gateway = (10 << 24) + (20 << 16) + call, np.full(len(stream), (10 << 24) + (9 << 16))
    near, far = 16384 + call % 16384, np.full(len(stream), 20000)
    for at, width, value, order in (
        (0, 4, START_S + micro // 1_000_000, "little"),
        (4, 4, micro % 1_000_000, "little"),
        (8, 4, frame, "little"),
        (12, 4, frame, "little"),
        (32, 2, packet, "big"),
        (42, 4, np.where(back, gateway, phone), "big"),
        (46, 4, np.where(back, phone, gateway), "big"),
        (50, 2, np.where(back, far, near), "big"),
        (52, 2, np.where(back, near, far), "big"),
        (54, 2, packet - 20, "big"),
        (60, 2, number + stream * 7, "big"),
        (62, 4, number * 160, "big"),
        (66, 4, stream + 5000, "big"),
    ):
        for octet in range(width):
            shift = octet if order == "little" else width - 1 - octet
            rows[:, at + octet] = value >> 8 * shift & 0xFF
    written: Octets = rows[np.arange(LONGEST_OCTETS) < RECORD_OCTETS + frame[:, None]]
    return written


def _in_its_own_process(name: str, path: Path) -> list[float]:
    """Returns nanoseconds a packet of one decoder, or nothing where it is not installed.

    What one decoder leaves in memory would slow the next down.
    """
    with get_context("spawn").Pool(1) as pool:
        return pool.apply(_timed, (name, path))


def _timed(name: str, path: Path) -> list[float]:
    try:
        DECODERS[name](path, WARM_UP_PACKETS)
        begin = time.perf_counter()
        packets = DECODERS[name](path, MOST_PACKETS[name])
    except ModuleNotFoundError as missing:
        if missing.name != name:
            raise
        return []
    return [(time.perf_counter() - begin) / packets * 1e9]


def _read(path: Path, most: int) -> int:
    """Reads the whole capture as `linkwatch read` does; with few packets it only warms up."""
    if most < MOST_PACKETS["read"]:
        default_plan()
        return most
    return read_capture(path, default_plan(), on_snapshot=lambda _: None).packets


def _with_dpkt(path: Path, most: int) -> int:
    """Decodes as far as RTP with dpkt, a plain loop."""
    import dpkt

    with path.open("rb") as file:
        for _, frame in islice(dpkt.pcap.Reader(file), most):
            udp = dpkt.ethernet.Ethernet(frame).data.data
            rtp = dpkt.rtp.RTP(udp.data)
            _ = udp.sport, udp.dport, rtp.pt, rtp.seq, rtp.ts, rtp.ssrc
    return most


def _with_scapy(path: Path, most: int) -> int:
    """Decodes as far as RTP with scapy, a plain loop."""
    from scapy.layers.inet import UDP
    from scapy.layers.l2 import Ether  # noqa: F401 - brings the decoder of Ethernet
    from scapy.layers.rtp import RTP
    from scapy.utils import PcapReader

    for packet in islice(PcapReader(str(path)), most):
        udp = packet[UDP]
        rtp = RTP(bytes(udp.payload))
        _ = udp.sport, udp.dport, rtp.payload_type, rtp.sequence, rtp.timestamp, rtp.sourcesync
    return most


DECODERS = {"read": _read, "dpkt": _with_dpkt, "scapy": _with_scapy}


def _help_s() -> float:
    command = [sys.executable, "-m", "linkwatch", "--help"]
    return statistics.median(
        _seconds_of(lambda: subprocess.run(command, capture_output=True, check=True))
        for _ in range(5)
    )


def _seconds_of(work: Callable[[], object]) -> float:
    begin = time.perf_counter()
    work()
    return time.perf_counter() - begin


def _read_mb(path: Path) -> float:
    """Returns the peak memory of a process of its own that reads the capture."""
    return _peak_mb([sys.executable, "-m", "linkwatch", "read", str(path), "--json"])


def _peak_mb(command: list[str]) -> float:
    """Returns the resident memory of a command at its peak.

    A process inherits the peak of the one that starts it, so a small one starts it, not this one.
    """
    asked = subprocess.run(
        [sys.executable, "-c", ASK_PEAK, *command], capture_output=True, check=True
    )
    unit = 1 if sys.platform == "darwin" else 1024  # octets there, kilobytes elsewhere
    return int(asked.stdout) * unit / 1e6
