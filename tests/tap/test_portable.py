"""The listening socket of other systems, tried on Linux's loopback."""

import os
import socket
import sys
import time
from contextlib import closing
from ctypes.util import find_library

import pytest

from linkwatch.frames import LinkType
from linkwatch.tap.portable import KEPT_OCTETS, ListeningSocket

pytestmark = [
    pytest.mark.skipif(not sys.platform.startswith("linux"), reason="needs Linux"),
    pytest.mark.skipif(getattr(os, "geteuid", lambda: 1)() != 0, reason="needs root"),
]
HEADERS = 14 + 20 + 8  # Ethernet (IEEE 802.3), IPv4 (RFC 791) and UDP (RFC 768)
MOST_S = 1.8


@pytest.fixture(autouse=True)
def without_libpcap(monkeypatch):
    """Where libpcap is missing, Linux cannot compile the filter: then everything is heard."""
    from scapy.arch import linux

    if find_library("pcap") is None:
        monkeypatch.setattr(linux, "attach_filter", lambda *_: None)


def heard(payloads):
    """Sends datagrams over loopback and returns those heard: (cut frame, length, time)."""
    got = []
    with (
        closing(socket.socket(socket.AF_INET, socket.SOCK_DGRAM)) as here,
        closing(socket.socket(socket.AF_INET, socket.SOCK_DGRAM)) as there,
    ):
        there.bind(("127.0.0.1", 0))
        port = there.getsockname()[1]
        tap = ListeningSocket("lo")
        begin = time.monotonic()
        for batch in tap.batches():
            assert batch.link_type is LinkType.ETHERNET
            for at, kept, length, seen in zip(
                batch.offsets, batch.captured, batch.original, batch.times, strict=True
            ):
                octets = bytes(batch.octets[at : at + kept])
                if octets[36:38] == port.to_bytes(2, "big"):
                    got.append((octets, int(length), int(seen)))
            if len(got) >= len(payloads) or time.monotonic() - begin > MOST_S:
                tap.close()
            for payload in payloads:
                here.sendto(payload, ("127.0.0.1", port))
        assert tap.statistics().frames >= len(got)
    return got


def test_datagrams_are_heard_with_their_true_lengths_and_cut_to_their_headers():
    """Each frame has its length on the port, and no more octets than its headers need."""
    payloads = [b"a" * 172, b"b" * 32]
    before = time.time_ns()
    got = heard(payloads)
    assert got
    assert {length for _, length, _ in got} <= {HEADERS + len(of) for of in payloads}
    for octets, length, seen in got:
        assert len(octets) == min(KEPT_OCTETS, length)
        assert octets[HEADERS : HEADERS + 1] in (b"a", b"b")
        assert abs(seen - before) < 60 * 10**9


def test_closing_ends_the_batches_and_a_remark_tells_what_is_not_known():
    """A closed tap yields nothing more, and says that drops are not known here."""
    tap = ListeningSocket("lo")
    tap.remark("and another thing")
    tap.close()
    tap.close()
    assert list(tap.batches()) == []
    assert "not known" in tap.statistics().remarks[0]
    assert tap.statistics().remarks[1] == "and another thing"
    assert tap.counters().up
