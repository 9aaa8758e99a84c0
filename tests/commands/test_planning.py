"""`linkwatch cost` and `linkwatch plan`: for people in 80 columns, and for machines."""

import json
from pathlib import Path

import pytest

from linkwatch.commands.planning import print_cost, print_plan
from linkwatch.errors import InputError
from linkwatch.plan.planfile import default_plan, load_plan, parse_plan

EXAMPLES = sorted((Path(__file__).parents[2] / "config").glob("*.yaml"))


def test_cost_for_machines_has_the_agreed_keys():
    """Others rely on these keys and units."""
    assert json.loads(print_cost("g729", 20, "crtp,ppp", as_json=True)) == {
        "codec": "G729",
        "packet_ms": 20,
        "payload_octets": 20,
        "ip_octets": 60,
        "link_octets": 29,
        "packets_per_second": 50,
        "kbps": 11.6,
    }


def test_cost_for_people_shows_how_the_octets_came_about():
    """A line for each layer, and the sum."""
    text = print_cost("G729", 20, "crtp,ppp", srtp_tag_octets=4)
    lines = [" ".join(line.split()) for line in text.splitlines()]
    assert lines == [
        "G729, 20 ms, IPv4: one direction of one call",
        "",
        "payload 20 octets 2 x 10 octets, 10 ms each",
        "IP packet 64 octets IPv4 20, UDP 8, RTP 12, SRTP tag 4",
        "crtp 26 octets IP, UDP and RTP headers become 2",
        "ppp 33 octets flags 1, address and control 2, protocol 2, FCS 2",
        "",
        "on the link 33 octets 50 packets/s 13.20 kbit/s",
    ]


@pytest.mark.parametrize(
    "framing",
    [
        "ip",
        "esp:cipher=aes-cbc-sha256:natt=yes:outer_ip=6,pppoe,ethernet,aal5:fcs=yes",
        "gre:key=yes:sequence=yes:checksum=yes,mpls:labels=8,ethernet:preamble=yes:gap=yes",
        "frame-relay",
    ],
)
def test_cost_fits_into_80_columns(framing):
    """Whatever the stack."""
    text = print_cost("G723-6.3", 30, framing, ipv6=True, srtp_tag_octets=16)
    assert max(len(line) for line in text.splitlines()) <= 80


def test_a_wrong_cost_is_one_clear_error():
    """Codec, packetisation and framing are each told."""
    for wrong in (("G999", 20, "ppp"), ("G729", 25, "ppp"), ("G729", 20, "pp")):
        with pytest.raises(InputError, match="wanted"):
            print_cost(*wrong)


@pytest.mark.parametrize("file", EXAMPLES, ids=lambda file: file.name)
def test_a_plan_fits_into_80_columns_with_its_cautions(file):
    """And never without the word on emergency calls."""
    text = print_plan(load_plan(file))
    assert max(len(line) for line in text.splitlines()) <= 80
    assert "must never refuse an emergency call" in text
    assert "no guarantee" in text


def test_a_plan_says_what_fits_and_what_the_reserve_leaves():
    """Per direction of each link."""
    text = print_plan(load_plan(EXAMPLES[1]))
    rows = {line[2:18].strip(): line[18:].split() for line in text.splitlines() if len(line) > 18}
    assert rows["budget"] == ["506.9", "506.9", "kbit/s"]
    assert rows["fit into it"] == ["43", "43", "calls"]
    assert rows["left beside it"] == ["22", "22", "calls"]


def test_a_plan_tells_what_stands_against_it():
    """Doubts stand under their link."""
    plan = parse_plan("links: [{budget: {calls: 24, kbps: 660}}]", "kiln.yaml")
    assert "! each way: 24 planned calls cost 2092.8 kbit/s" in print_plan(plan)


def test_no_plan_at_all_is_said_so():
    """Without limits there is no figure to invent."""
    text = print_plan(default_plan())
    assert "no plan" in text
    assert "no limit" in text
    assert "not given" in text


def test_a_site_of_both_ip_versions_is_told_what_ipv6_costs():
    """The dearer figure is not hidden."""
    prefixes = "links: [{site_prefixes: [10.0.0.0/8, '2001:db8::/32']}]"
    assert "over IPv6 it costs 95.20 kbit/s" in print_plan(parse_plan(prefixes, "kiln.yaml"))


def test_a_plan_for_machines_has_the_same_figures():
    """Directions, doubts and cautions as keys."""
    answer = json.loads(print_plan(load_plan(EXAMPLES[1]), as_json=True))
    (link,) = answer["links"]
    assert link["call"]["kbps"] == 11.6
    assert link["to_site"]["room_calls"] == 22
    assert link["doubts"] == []
    assert len(answer["cautions"]) == 2
