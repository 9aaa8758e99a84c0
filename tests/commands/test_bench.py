"""The bench: what it answers, not how fast anything is."""

import json
import sys
from collections import defaultdict

import dpkt
import numpy as np
import pytest

from linkwatch.commands.bench import (
    DECODERS,
    _peak_mb,
    _timed,
    print_bench,
    run_bench,
    write_capture,
)
from linkwatch.errors import InputError


@pytest.fixture(scope="module")
def bench():
    """The smallest bench there is, in one round."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("linkwatch.commands.bench.ROUNDS", 1)
        return run_bench(20, 50_000)


def test_our_speed_is_told_as_ratios_to_both_other_decoders(bench):
    """dpkt and scapy are measured, and each has a ratio."""
    assert (bench.streams, bench.packets, bench.missing) == (20, 50_000, ())
    assert set(bench.ratios) == set(bench.others) == {"dpkt", "scapy"}
    assert all(ratio > 0 for ratio in bench.ratios.values())
    assert bench.samples == {"dpkt": 50_000, "scapy": 2_000}
    assert bench.read_ns > 0
    assert bench.help_s > 0
    assert bench.read_mb > 1


def test_the_text_puts_ratios_before_absolute_figures(bench):
    """A reader meets the ratios first."""
    text = print_bench(bench, as_json=False)
    last_ratio = text.rindex("times as fast as")
    assert last_ratio < text.index("ns a packet")
    assert last_ratio < text.index("MB resident")
    assert all(name in text[: text.index("ns a packet")] for name in ("dpkt", "scapy"))
    assert "over the first 2000" in text


def test_a_decoder_that_is_not_installed_is_told_with_its_remedy(bench):
    """What is missing is said with the command that installs it."""
    text = print_bench(bench._replace(missing=("dpkt",)), as_json=False)
    assert "pip install dpkt" in text


def test_a_decoder_that_is_not_installed_gives_no_figure(monkeypatch, tmp_path):
    """A missing decoder leaves the rest of the bench standing."""
    monkeypatch.setitem(sys.modules, "dpkt", None)
    write_capture(tmp_path / "a.pcap", 2, 40)
    assert _timed("dpkt", tmp_path / "a.pcap") == []


def test_a_fault_of_our_own_is_not_taken_for_a_missing_decoder(monkeypatch, tmp_path):
    """An import that fails for another reason is not passed over."""

    def broken(path, most):
        raise ImportError("cannot import name", name="linkwatch")

    monkeypatch.setitem(DECODERS, "read", broken)
    with pytest.raises(ImportError):
        _timed("read", tmp_path)


def test_the_memory_of_a_command_is_its_own():
    """What the bench itself holds is not counted as the command's."""
    ballast = np.ones(25_000_000)  # 200 MB, every page of it touched
    assert 1 < _peak_mb([sys.executable, "-c", "pass"]) < ballast.nbytes / 2e6


def test_the_machine_readable_answer_holds_every_figure(bench):
    """`--json` has each field, as measured."""
    answer = json.loads(print_bench(bench, as_json=True))
    assert set(answer) == set(bench._fields)
    assert answer["ratios"] == bench.ratios


@pytest.mark.parametrize(
    ("streams", "packets"), [(0, 50_000), (30_001, 400_000), (20, 49_999), (6000, 59_999)]
)
def test_sizes_that_make_no_bench_are_refused_in_one_line(streams, packets):
    """Too few or too many streams or packets are told with what would be right."""
    with pytest.raises(InputError) as told:
        run_bench(streams, packets)
    assert "30,000 streams" in str(told.value)


def test_the_capture_holds_the_promised_streams_of_sound_packets(tmp_path):
    """By dpkt: PCMU and G729 calls of two streams, in steps of one packet and 160 ticks."""
    write_capture(tmp_path / "a.pcap", 6, 420)
    streams, times, codecs = defaultdict(list), [], defaultdict(set)
    with (tmp_path / "a.pcap").open("rb") as file:
        for time, octets in dpkt.pcap.Reader(file):
            packet = dpkt.ethernet.Ethernet(octets).data
            udp = packet.data
            speech = dpkt.rtp.RTP(udp.data)
            assert (packet.len, udp.ulen) == (len(octets) - 14, len(octets) - 34)
            assert speech.version == 2
            key = (packet.src, udp.sport, packet.dst, udp.dport, speech.ssrc)
            streams[key].append((speech.seq, speech.ts, time))
            times.append(time)
            codecs[key].add((speech.pt, len(speech.data)))
    assert times == sorted(times)
    assert len(streams) == 6
    assert len({frozenset([key[:2], key[2:4]]) for key in streams}) == 3
    # RFC 3551 table 4: PCMU is 0 and G729 is 18; by 4.5.14 and 4.5.6, 8 and 1 octets a ms.
    assert sorted(codecs.values(), key=str) == [{(0, 160)}] * 4 + [{(18, 20)}] * 2
    for packets in streams.values():
        assert len(packets) == 70
        for i, (sequence, timestamp, time) in enumerate(packets):
            assert sequence == packets[0][0] + i
            assert timestamp == packets[0][1] + 160 * i
            assert float(time - packets[0][2]) == pytest.approx(0.02 * i, abs=2e-6)
