"""The main job on real traffic: other software's RTP over a real interface, heard by a process.

Each test sends for a few seconds between two network namespaces that it made itself.
"""

import json
import subprocess
import sys
import time
from pathlib import Path

import pytest

SENDER = Path(__file__).parent / "sender.py"
PACKETS = 150  # three seconds of 20 ms
PLAN = """
site: lab
links:
  - name: wan
    capacity_kbps: 2048
    framing: [mlppp, ppp]
    site_prefixes: [192.0.2.1/32]
    budget: {calls: 4, kbps: 170, reserve_calls: 0}
    call: {codec: PCMU, packet_ms: 20, marking: EF}
alarms: {loss_percent: 1.0, jitter_ms: 100, hold_seconds: 1}
"""
# MLPPP with the long sequence number and one flag: 13 octets (RFC 1990 3, RFC 1662 3.1; W27).
MLPPP = 13

pytestmark = pytest.mark.lab


@pytest.fixture
def plan(tmp_path):
    path = tmp_path / "plan.yaml"
    path.write_text(PLAN)
    return path


def logger(wire, side, plan, seconds, *more):
    """Starts `linkwatch log` on one side's port; returns the process once it listens."""
    asked = [sys.executable, "-m", "linkwatch", "log", "--tap", wire.port(side), "--plan", plan]
    asked += ["--for", seconds, "--json", *more]
    process = wire.run(side, [str(word) for word in asked])
    first = process.stdout.readline()
    assert first, process.stderr.read()
    assert json.loads(first)["tap"]["hearing"]
    return process


def call(wire, codec, number, packets=PACKETS):
    """Starts both directions of a call; returns the two senders, the one at the site first."""
    here, there = 5000 + 10 * number, 6000 + 10 * number
    return [
        wire.run("near", [sys.executable, SENDER, codec, "192.0.2.2", there, here, packets]),
        wire.run("far", [sys.executable, SENDER, codec, "192.0.2.1", here, there, packets]),
    ]


def answer(process):
    out, err = process.communicate(timeout=60)
    assert process.returncode == 0, err
    return out


def used_octets(snapshots, way):
    """Returns all octets that the snapshots say were used on the link, one way."""
    kbit = sum(s["links"][0][way]["used_kbps"] * s["interval_s"] for s in snapshots)
    return kbit * 1000 / 8


def test_calls_are_counted_and_costed_to_the_octet(wire, plan, tmp_path):
    """Four calls in four codecs: their number, and every octet through the plan's framing."""
    recorder = wire.record("far", tmp_path / "wire.pcap")
    process = logger(wire, "far", plan, 60)
    senders = [call(wire, c, i) for i, c in enumerate(["PCMU", "PCMA", "G722", "opus"])]
    sent = [json.loads(answer(sender))["packets"] for pair in senders for sender in pair]
    recorder.stop()
    time.sleep(0.5)  # a block of the ring is handed over within a twentieth of a second
    process.terminate()
    snapshots = [json.loads(line) for line in answer(process).splitlines()]
    assert max(s["calls_up"] for s in snapshots) == 4
    assert max(s["links"][0]["to_site"]["calls"] for s in snapshots) == 4
    fullest = max(snapshots, key=lambda s: (s["calls_up"], s["links"][0]["to_site"]["used_kbps"]))
    assert {(used["codec"], used["packet_ms"], used["calls"]) for used in fullest["codecs"]} == {
        ("PCMU", 20, 1),
        ("PCMA", 20, 1),
        ("G722", 20, 1),
        ("unknown", 20, 1),
    }
    from_site = recorder.ip_octets("192.0.2.1", range(5000, 5040, 10))
    to_site = recorder.ip_octets("192.0.2.2", range(6000, 6040, 10))
    for way, lengths in (("from_site", from_site), ("to_site", to_site)):
        on_link = sum(length + MLPPP for length in lengths)
        assert used_octets(snapshots, way) == pytest.approx(on_link, abs=0.5)
    assert snapshots[-1]["tap"]["voice_packets"] == len(from_site) + len(to_site)
    # A sender whose far end is not open yet may be refused a few packets.
    assert 0 <= sum(sent) - len(from_site) - len(to_site) < 100
    assert all(s["tap"]["dropped"] == 0 for s in snapshots)
    raised = {alarm["kind"] for s in snapshots for alarm in s["alarms"]}
    assert {"over-budget", "unplanned-codec"} <= raised


@pytest.mark.parametrize("codec", ["PCMU", "PCMA", "G722"])
def test_a_call_is_recognised_in_a_capture_of_it(wire, plan, tmp_path, codec):
    """Codec, packetisation, cost and loss of a real call, from a capture of the wire."""
    path = tmp_path / "wire.pcap"
    recorder = wire.record("far", path)
    sent = [json.loads(answer(sender)) for sender in call(wire, codec, 1, packets=75)]
    recorder.stop()
    asked = [sys.executable, "-m", "linkwatch", "read", path, "--plan", plan, "--json"]
    told = json.loads(subprocess.run(asked, capture_output=True, check=True).stdout)
    assert (told["peak_calls"], told["conversations"]) == (1, 1)
    assert told["calls"][0]["both_ways"]
    for stream in told["streams"]:
        assert (stream["codec"], stream["codec_evidence"]) == (codec, "static")
        assert (stream["packet_ms"], stream["packets"], stream["lost"]) == (20, 75, 0)
        assert (stream["dscp"], stream["dscp_steady"]) == (46, True)
        assert stream["ip_octets"] == 75 * 200
        assert stream["link_octets"] == 75 * 213
        # One direction of G.711 or G722 at 20 ms over MLPPP: 213 octets 50 times a second.
        assert stream["link_kbps"] == pytest.approx(85.2, rel=0.02)
    assert {json.dumps(each) for each in sent} == {'{"packets": 75, "payload_octets": 12000}'}


def test_loss_is_what_was_sent_and_did_not_arrive(wire, plan, tmp_path):
    """On a throttled wire, packets expected less packets captured is the loss reported."""
    path = tmp_path / "wire.pcap"
    wire.throttle("near", kbps=60)  # a G.711 call needs 85.6 on Ethernet without the checksum
    recorder = wire.record("far", path)
    sender, _ = call(wire, "PCMU", 1, packets=200)
    sent = json.loads(answer(sender))["packets"]
    recorder.stop()
    asked = [sys.executable, "-m", "linkwatch", "read", path, "--plan", plan, "--json"]
    told = json.loads(subprocess.run(asked, capture_output=True, check=True).stdout)
    (stream,) = [s for s in told["streams"] if s["src"] == "192.0.2.1"]
    arrived = len(recorder.ip_octets("192.0.2.1", [stream["src_port"]]))
    assert stream["packets"] == arrived < sent
    # What was lost after the last packet that arrived, nobody can tell.
    assert stream["lost"] == stream["expected"] - arrived
    assert sent - stream["expected"] < 50
    assert stream["lost"] > 20


def test_without_the_right_to_read_it_ends_with_the_remedy(wire, plan):
    """Who may not open packet sockets gets one line, the remedy and exit status 3 from `log`."""
    asked = [sys.executable, "-m", "linkwatch", "log", "--tap", wire.port("far"), "--json"]
    process = wire.run("far", ["setpriv", "--bounding-set=-net_raw", "--", *asked])
    out, err = process.communicate(timeout=30)
    assert (process.returncode, out) == (3, "")
    assert len(err.splitlines()) == 1
    assert "sudo" in err


def test_under_sudo_root_is_given_up_and_the_watch_goes_on(wire, plan):
    """From the first snapshot on, the process is its caller's, and hears all the same."""
    caller = ["env", "SUDO_UID=65534", "SUDO_GID=65534"]
    asked = [*caller, sys.executable, "-m", "linkwatch", "log", "--tap", wire.port("far")]
    process = wire.run("far", [*asked, "--plan", plan, "--json"])
    assert process.stdout.readline(), process.stderr.read()
    status = Path(f"/proc/{process.pid}/status").read_text().splitlines()
    told = dict(line.split(":\t", 1) for line in status if ":\t" in line)
    assert set(told["Uid"].split()) == set(told["Gid"].split()) == {"65534"}
    assert int(told["CapEff"], 16) == 0
    senders = call(wire, "PCMU", 1, packets=75)
    for sender in senders:
        answer(sender)
    process.terminate()
    snapshots = [json.loads(line) for line in answer(process).splitlines()]
    assert max(s["calls_up"] for s in snapshots) == 1


def test_it_starts_before_the_first_call_and_ends_when_asked(wire, plan):
    """SIGINT ends a watch with status 130 and without a traceback."""
    process = logger(wire, "far", plan, 60)
    time.sleep(0.5)
    process.send_signal(2)
    _, err = process.communicate(timeout=10)
    assert process.returncode == 130
    assert "Traceback" not in err
