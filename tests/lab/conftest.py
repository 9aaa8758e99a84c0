"""Two network namespaces joined by a wire, for real traffic that reaches nobody else."""

import os
import subprocess
import sys
from ipaddress import ip_address
from pathlib import Path

import dpkt
import pytest

HERE = Path(__file__).parent
SIDES = {"near": ("192.0.2.1", "2001:db8::1"), "far": ("192.0.2.2", "2001:db8::2")}


def sh(*words):
    subprocess.run([str(word) for word in words], check=True, capture_output=True, timeout=20)


class Wire:
    """Namespaces "near" and "far", each with one port of a veth pair."""

    def __init__(self):
        self._id = f"lw{os.getpid()}"
        self._started = []
        self._spaces = [self.space(side) for side in SIDES]

    def space(self, side):
        return f"{self._id}{side}"

    def port(self, side):
        return f"{side}0"

    def set_up(self):
        for space in self._spaces:
            sh("ip", "netns", "add", space)
        near, far = self._spaces
        peer = ["peer", "name", self.port("far"), "netns", far]
        sh("ip", "link", "add", self.port("near"), "netns", near, "type", "veth", *peer)
        for side, (four, six) in SIDES.items():
            inside = ["ip", "-n", self.space(side)]
            sh(*inside, "addr", "add", f"{four}/24", "dev", self.port(side))
            sh(*inside, "addr", "add", f"{six}/64", "dev", self.port(side), "nodad")
            sh(*inside, "link", "set", self.port(side), "up")
            sh(*inside, "link", "set", "lo", "up")

    def take_down(self):
        for process in self._started:
            process.kill()
            process.wait()
            process.stdout.close()
            process.stderr.close()
        for space in self._spaces:
            subprocess.run(["ip", "netns", "del", space], check=False, capture_output=True)

    def run(self, side, words):
        """Starts a process on one side; its output is text, and it is ended with the test."""
        inside = ["ip", "netns", "exec", self.space(side)]
        process = subprocess.Popen(
            inside + [str(word) for word in words],
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )
        self._started.append(process)
        return process

    def throttle(self, side, kbps):
        """Lets only so much leave a side; what waits too long is dropped."""
        words = ["tbf", "rate", f"{kbps}kbit", "burst", "2000", "limit", "3000"]
        sh("tc", "-n", self.space(side), "qdisc", "add", "dev", self.port(side), "root", *words)

    def record(self, side, path):
        """Begins to record a side's port into a capture file."""
        process = self.run(side, [sys.executable, HERE / "recorder.py", self.port(side), path])
        assert process.stdout.readline() == "ready\n"
        return Recording(process, path)


class Recording:
    def __init__(self, process, path):
        self._process, self._path = process, path

    def stop(self):
        self._process.terminate()
        _, err = self._process.communicate(timeout=10)
        assert self._process.returncode == 0, err

    def ip_octets(self, source, ports):
        """Returns the IP length of each datagram from these ports, as dpkt finds them."""
        packed, lengths = ip_address(source).packed, []
        with self._path.open("rb") as file:
            for _, frame in dpkt.pcap.Reader(file):
                ip = dpkt.ethernet.Ethernet(frame).data
                if not isinstance(ip, dpkt.ip.IP) or not isinstance(ip.data, dpkt.udp.UDP):
                    continue
                if ip.src == packed and ip.data.sport in ports:
                    lengths.append(ip.len)
        return lengths


@pytest.fixture
def wire(lab):
    """Two namespaces joined by a wire; everything on it ends with the test."""
    made = Wire()
    try:
        made.set_up()
        yield made
    finally:
        made.take_down()
