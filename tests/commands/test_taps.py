"""What `linkwatch taps` prints."""

import json
from dataclasses import replace

from linkwatch.commands.taps import print_taps
from linkwatch.tap.ports import Port, list_ports

WAN = Port("wan0", True, 1_000_000, 1500, ("10.20.0.1", "2001:db8:20::1"), True, "")
SPARE = Port("spare1", False, 0, 9000, (), True, "")


def test_each_port_has_a_line_with_what_is_known_of_it():
    """State, speed, MTU and addresses stand beside the name; an untold speed is a question mark."""
    lines = print_taps([WAN, SPARE], as_json=False).splitlines()
    assert lines[1].split() == ["wan0", "up", "1000", "1500", "10.20.0.1,", "2001:db8:20::1"]
    assert lines[2].split() == ["spare1", "down", "?", "9000"]
    assert lines[-1] == "Packets may be read on all of them."
    assert not any(line != line.rstrip() for line in lines)


def test_a_remedy_that_all_ports_share_is_told_once():
    """Where packets may not be read the remedy is told, and not once per port."""
    barred = [replace(port, readable=False, remedy="Ask nicely.") for port in (WAN, SPARE)]
    text = print_taps(barred, as_json=False)
    assert text.count("Ask nicely.") == 1
    assert "may be read on all" not in text


def test_the_machine_readable_answer_holds_every_port_whole():
    """`--json` is a list of the ports with all their fields."""
    answer = json.loads(print_taps([WAN, SPARE], as_json=True))
    assert [port["name"] for port in answer] == ["wan0", "spare1"]
    assert answer[0] == {
        "name": "wan0",
        "up": True,
        "speed_kbps": 1_000_000,
        "mtu": 1500,
        "addresses": ["10.20.0.1", "2001:db8:20::1"],
        "readable": True,
        "remedy": "",
    }


def test_the_ports_of_this_machine_can_be_printed():
    """Both forms take the real ports."""
    ports = list_ports()
    text = print_taps(ports, as_json=False)
    assert all(port.name in text for port in ports)
    assert len(json.loads(print_taps(ports, as_json=True))) == len(ports)
