"""The command line, as a technician and as a script use it."""

import json
import os
import subprocess
import sys
from pathlib import Path

import dpkt
import pytest
from wirebuild import both_ways, speech

CONFIG = Path(__file__).parent.parent / "config"


def linkwatch(*words, text_in=None):
    """Runs the command; returns (exit status, stdout, stderr)."""
    asked = [sys.executable, "-m", "linkwatch", *map(str, words)]
    done = subprocess.run(
        asked, capture_output=True, text=True, check=False, input=text_in, timeout=60
    )
    return done.returncode, done.stdout, done.stderr


def capture(path, frames):
    with path.open("wb") as file:
        writer = dpkt.pcap.Writer(file, nano=True)
        for time, octets in frames:
            writer.writepkt_time(octets, time / 1e9)
    return path


@pytest.fixture
def one_call(tmp_path):
    return capture(tmp_path / "call.pcap", both_ways(packets=200, lose={50}))


PLAN = """
site: Kiln Lane depot
links:
  - {name: wan, framing: [ethernet], site_prefixes: [10.20.0.0/16],
     budget: {calls: 4, kbps: 60}, call: {codec: G729, packet_ms: 20, marking: EF}}
alarms: {hold_seconds: 1}
"""


@pytest.fixture
def plan(tmp_path):
    (tmp_path / "plan.yaml").write_text(PLAN)
    return tmp_path / "plan.yaml"


def test_cost_answers_by_the_published_keys():
    """RFC 2508 and RFC 1662: G729 at 20 ms over cRTP and PPP is 29 octets, 11.6 kbit/s (W25)."""
    words = ["cost", "--codec", "G729", "--packet-ms", 20, "--framing", "crtp,ppp", "--json"]
    status, out, _ = linkwatch(*words)
    assert status == 0
    assert json.loads(out) == {
        "codec": "G729", "packet_ms": 20.0, "payload_octets": 20, "ip_octets": 60,
        "link_octets": 29, "packets_per_second": 50.0, "kbps": 11.6,
    }  # fmt: skip


def test_read_answers_by_the_published_keys(one_call, plan):
    """Streams, calls, alarms and snapshots have the keys that others rely on."""
    status, out, _ = linkwatch("read", one_call, "--plan", plan, "--json")
    told = json.loads(out)
    assert status == 0
    assert set(told) >= {
        "packets", "streams", "calls", "peak_calls", "conversations", "peak_conversations",
        "alarms", "snapshots",
    }  # fmt: skip
    assert set(told["streams"][0]) >= {
        "src", "src_port", "dst", "dst_port", "ssrc", "payload_type", "media", "codec",
        "codec_evidence", "packet_ms", "packets", "expected", "lost", "lost_a3", "duplicates",
        "reordered", "jitter_ms", "jitter_mean_ms", "jitter_max_ms", "dscp", "first", "last",
        "ip_octets", "link_kbps",
    }  # fmt: skip
    assert set(told["calls"][0]) >= {
        "id", "streams", "both_ways", "start", "end", "crosses", "codec", "reserved_kbps",
        "used_kbps", "mos",
    }  # fmt: skip
    assert set(told["alarms"][0]) == {
        "kind", "severity", "link", "raised", "cleared", "subject", "text",
    }  # fmt: skip
    assert told["packets"] == 398
    assert told["calls"][0]["streams"] == [0, 1]
    assert [stream["lost"] for stream in told["streams"]] == [1, 1]
    kinds = {alarm["kind"] for alarm in told["alarms"]}
    assert kinds == {"over-budget", "unplanned-codec"}


def test_judged_bad_news_is_exit_status_one(one_call, plan):
    """`--judge` makes an alarm the command's own failure; without it, it is only told."""
    assert linkwatch("read", one_call, "--plan", plan)[0] == 0
    assert linkwatch("read", one_call, "--plan", plan, "--judge")[0] == 1
    assert linkwatch("read", one_call, "--judge")[0] == 0
    assert linkwatch("log", "--capture", one_call, "--plan", plan, "--judge")[0] == 1
    assert linkwatch("count", "--capture", one_call, "--plan", plan, "--judge")[0] == 1


def test_read_tells_people_what_it_found(one_call, plan):
    """Calls, their cost and what is wrong, in lines."""
    _, out, _ = linkwatch("read", one_call, "--plan", plan)
    assert "1 call in 1 conversation" in out
    assert "PCMU" in out
    assert "over-budget" in out


def test_log_prints_a_snapshot_a_line(one_call, plan):
    """Each line is a whole snapshot as JSON, one a second of the source."""
    _, out, _ = linkwatch("log", "--capture", one_call, "--plan", plan, "--json")
    snapshots = [json.loads(line) for line in out.splitlines()]
    assert len(snapshots) == 4
    assert set(snapshots[0]) >= {"time", "tap", "links", "calls_up", "alarms"}
    assert set(snapshots[0]["tap"]) >= {"name", "packets", "dropped"}
    link = snapshots[0]["links"][0]
    assert set(link) >= {"name", "to_site", "from_site", "link_kbps"}
    assert set(link["to_site"]) >= {
        "calls", "reserved_kbps", "used_kbps", "budget_kbps", "room_calls",
    }  # fmt: skip
    assert [s["calls_up"] for s in snapshots] == [1, 1, 1, 1]


def test_count_answers_how_many(one_call, plan):
    """Calls up, planned, and room for, as JSON and as a sentence."""
    _, out, _ = linkwatch("count", "--capture", one_call, "--plan", plan, "--json")
    told = json.loads(out)
    assert (told["calls_up"], told["planned_calls"], told["room_calls"]) == (1, 4, 0)
    assert told["time"] > 0
    _, out, _ = linkwatch("count", "--capture", one_call, "--plan", plan)
    assert out.startswith("1 call up at")


def test_the_scene_can_be_counted_for_a_while():
    """`--for` is in the scene's own seconds, whatever the speed."""
    status, out, _ = linkwatch("count", "--scene", "--for", 40, "--json")
    assert status == 0
    assert json.loads(out)["calls_up"] >= 2


def test_standard_input_is_a_capture(one_call):
    """A capture may come through a pipe."""
    asked = [sys.executable, "-m", "linkwatch", "read", "-", "--json"]
    with one_call.open("rb") as file:
        told = subprocess.run(asked, stdin=file, capture_output=True, check=True)
    assert json.loads(told.stdout)["packets"] == 398


@pytest.mark.parametrize("name", [path.name for path in CONFIG.glob("*.yaml")])
def test_every_example_plan_is_worked_out(name):
    """The plans in config/ are good ones."""
    status, out, err = linkwatch("plan", CONFIG / name)
    assert (status, err) == (0, "")
    assert "kbit/s" in out


@pytest.mark.parametrize(
    ("words", "names"),
    [
        (["read", "/none/at/all.pcap"], "/none/at/all.pcap"),
        (["read", "."], "a directory"),
        (["read", __file__], "test_cli.py"),
        (["plan", "/none.yaml"], "/none.yaml"),
        (["cost", "--codec", "G7299"], "G7299"),
        (["cost", "--codec", "G729", "--packet-ms", "15"], "15"),
        (["cost", "--codec", "G729", "--framing", "pp"], "pp"),
        (["cost"], "--codec"),
        (["log"], "--tap"),
        (["log", "--tap", "none0"], "none0"),
        (["log", "--scene", "--capture", "x"], "2 given"),
        (["log", "--scene", "--every", "0"], "--every"),
        (["log", "--scene", "--speed", "-3"], "--speed"),
        (["count", "--scene", "--for", "nan"], "--for"),
        (["watch", "--scene"], "terminal"),
        (["demo", "--speed", "0"], "--speed"),
        (["nonsense"], "nonsense"),
        (["read"], "CAPTURE"),
        (["bench", "--streams", "0"], "bench"),
    ],
)
def test_bad_input_is_one_line_that_names_it(words, names):
    """Exit status 2, one line on stderr, nothing on stdout, no traceback."""
    status, out, err = linkwatch(*words)
    assert (status, out) == (2, "")
    assert len(err.splitlines()) == 1
    assert names in err


def test_names_from_outside_cannot_drive_the_terminal(tmp_path):
    """A file's name with control characters comes out inert."""
    hostile = tmp_path / "a\x1b[2Jb\r.pcap"
    capture(hostile, speech(packets=20))
    status, out, err = linkwatch("read", hostile)
    assert status == 0
    assert "\x1b" not in out + err
    assert "\r" not in out + err
    status, out, err = linkwatch("read", tmp_path / "none\x1b[2J.pcap")
    assert "\x1b" not in err


def test_a_reader_who_has_enough_is_no_error(one_call):
    """Closing the pipe early ends the command quietly."""
    asked = f"{sys.executable} -m linkwatch log --scene --json | head -n 1"
    told = subprocess.run(["bash", "-c", asked], capture_output=True, text=True, check=True)
    assert json.loads(told.stdout)
    assert told.stderr == ""


def test_help_imports_nothing_heavy():
    """`--help` starts fast because it loads neither numpy nor textual nor scapy."""
    code = (
        "import sys, linkwatch.cli;"
        "print({'numpy', 'textual', 'scapy', 'pydantic', 'yaml'} & set(sys.modules))"
    )
    told = subprocess.run([sys.executable, "-c", code], capture_output=True, check=True)
    assert told.stdout == b"set()\n"


def test_files_are_read_by_whoever_may(tmp_path):
    """A capture that may not be read is told, with the system's reason."""
    if os.geteuid() == 0:
        path = tmp_path / "gone" / "a.pcap"  # root may read everything: a missing folder then
    else:
        path = capture(tmp_path / "a.pcap", speech(packets=5))
        path.chmod(0)
    status, _, err = linkwatch("read", path)
    assert status == 2
    assert str(path) in err
