"""What live tests everywhere need: the right to make ports, and a pair of them."""

import contextlib
import itertools
import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

_numbers = itertools.count()


def why_no_lab():
    """Returns why real ports cannot be made here, or None."""
    if not sys.platform.startswith("linux"):
        return "needs another operating system: Linux"
    if os.geteuid() != 0:
        return "needs root"
    if not shutil.which("ip") or not shutil.which("tc"):
        return "needs ip and tc (iproute2)"
    return None


@pytest.fixture
def lab():
    """Skips the test, with the reason, where real ports cannot be made."""
    reason = why_no_lab()
    if reason:
        pytest.skip(reason)


@pytest.fixture
def lab_ports(lab):
    """Two ports joined by a wire, both up, with nobody on them."""
    number = f"{os.getpid() % 100_000}x{next(_numbers)}"
    here, there = f"lh{number}", f"lt{number}"

    def ip(*words, check=True):
        subprocess.run(["ip", *words], check=check, capture_output=True)

    ip("link", "add", here, "type", "veth", "peer", "name", there)
    try:
        for port in (here, there):
            # Without IPv6 the system itself sends nothing into the wire.
            with contextlib.suppress(OSError):
                Path(f"/proc/sys/net/ipv6/conf/{port}/disable_ipv6").write_text("1")
            ip("link", "set", port, "up")
        yield here, there
    finally:
        ip("link", "del", here, check=False)
