"""Plan files: what they mean, and how every fault is told."""

import os
from ipaddress import ip_address
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import ValidationError

from linkwatch.errors import PlanError
from linkwatch.plan.planfile import default_plan, load_plan, parse_plan
from linkwatch.plan.review import doubts

CONFIG = Path(__file__).parents[2] / "config"

WHOLE = """
site: Kiln Lane depot
links:
  - name: wan
    capacity_kbps: 2048
    framing: [crtp, ppp]
    site_prefixes: [10.20.0.0/16, 2001:db8:20::/48]
    budget: {calls: 24, kbps: 660, reserve_calls: 2}
    call: {codec: G729, packet_ms: 20, marking: EF, silence_suppression: true, srtp_tag_octets: 10}
payload_types: {97: ILBC, 101: telephone-event, 102: cn}
alarms: {loss_percent: 2.5, jitter_ms: 40, mos: 3.2, hold_seconds: 0}
acceptance:
  - {name: test call, want: {codec: G729, both_ways: true, marking: EF, seconds: 20}, count: 2}
  - {name: full load, want: {concurrent_calls: 20, seconds: 60, within_budget: true}}
"""


def test_a_whole_plan_is_read_as_written(plan_of):
    """Every key of the plan has its place."""
    plan = plan_of(WHOLE)
    (link,) = plan.links
    assert (plan.site, link.name, str(link.framing)) == ("Kiln Lane depot", "wan", "crtp, ppp")
    assert (link.capacity.to_site, link.capacity.from_site) == (2048, 2048)
    assert [str(network) for network in link.site_prefixes] == ["10.20.0.0/16", "2001:db8:20::/48"]
    assert (link.call.codec.name, link.call.packet_ms, link.call.dscp) == ("G729", 20, 46)
    assert (link.call.silence_suppression, link.call.srtp_tag_octets) == (True, 10)
    assert plan.payload_types == {97: "ILBC", 101: "telephone-event", 102: "CN"}
    assert (plan.alarms.loss_percent, plan.alarms.hold_seconds) == (2.5, 0)
    assert [criterion.count for criterion in plan.acceptance] == [2, 1]
    assert plan.acceptance[0].want.codec.name == "G729"
    assert plan.acceptance[1].want.within_budget
    assert plan.given


def test_what_is_left_out_has_a_stated_default(plan_of):
    """A plan may be as short as one empty link."""
    plan = plan_of("links: [{}]")
    (link,) = plan.links
    assert (link.name, str(link.framing), link.capacity) == ("link", "ethernet", None)
    assert (link.call.codec.name, link.call.packet_ms, link.call.dscp) == ("PCMU", 20, None)
    limits = plan.alarms
    assert (limits.loss_percent, limits.jitter_ms, limits.mos, limits.hold_seconds) == (
        1,
        30,
        3.6,
        5,
    )
    assert link.budget_for("to_site").room(10, 872.0) is None


def test_without_a_plan_nothing_is_promised():
    """The default plan is one link of Ethernet without limits, and says it was not given."""
    plan = default_plan()
    assert (plan.site, plan.given, len(plan.links)) == ("no plan", False, 1)
    assert plan.links[0].site_prefixes == ()
    assert plan.links[0].call_cost().kbps == 87.2


def test_a_plan_never_changes(plan_of):
    """What was promised stays as it was read."""
    plan = plan_of(WHOLE)
    with pytest.raises(ValidationError):
        plan.links[0].name = "other"
    with pytest.raises(TypeError):
        plan.payload_types[98] = "PCMU"


def test_a_share_is_of_each_directions_capacity(link_of):
    """A third of an asymmetric link is two figures."""
    link = link_of("capacity_kbps: {to_site: 8000, from_site: 2000}, budget: {share_percent: 33}")
    assert link.budget_for("to_site").kbps == pytest.approx(2640)
    assert link.budget_for("from_site").kbps == pytest.approx(660)


def test_a_site_of_both_ip_versions_costs_by_ipv4_unless_told(link_of):
    """`ipv6: true` plans the dearer call."""
    prefixes = "site_prefixes: [10.0.0.0/8, '2001:db8::/32']"
    assert link_of(prefixes).budget_for("to_site").call_kbps == 87.2
    assert link_of(f"{prefixes}, call: {{ipv6: true}}").budget_for("to_site").call_kbps == 95.2
    assert link_of(prefixes).call_cost(ipv6=True).kbps == 95.2


@pytest.mark.parametrize(
    ("source", "destination", "way"),
    [
        ("10.20.1.1", "192.0.2.1", "from_site"),
        ("192.0.2.1", "10.20.1.1", "to_site"),
        ("10.20.1.1", "10.20.9.9", None),
        ("192.0.2.1", "192.0.2.2", None),
        ("2001:db8:20::1", "2001:db8:99::1", "from_site"),
        ("10.20.1.1", "2001:db8:20::1", None),
    ],
)
def test_a_stream_crosses_where_one_end_is_inside(link_of, source, destination, way):
    """Two desks of one site do not cross the link, nor do two strangers."""
    link = link_of("site_prefixes: [10.20.0.0/16, '2001:db8:20::/48']")
    assert link.crossing(ip_address(source), ip_address(destination)) == way


def test_the_mode_of_ilbc_follows_the_packetisation(link_of):
    """A family's name alone is not one codec."""
    assert link_of("call: {codec: ILBC, packet_ms: 20}").call.codec.name == "ILBC-20"
    assert link_of("call: {codec: ILBC}").call.codec.name == "ILBC-30"


@pytest.mark.parametrize(
    ("keys", "said"),
    [
        ("framing: [crtp, pp]", 'links[0].framing[1]: "pp"; wanted one of aal5, crtp'),
        ("framing: [crtp, gre]", "links[0].framing[1]: gre around a packet with compressed"),
        ("framing: {ppp: 1}", "links[0].framing: a group of keys; wanted a list of layers"),
        ("framing: [{ppp: {flags: 3}}]", "links[0].framing[0]: ppp.flags 3; wanted one of 1, 2"),
        ("frming: [ppp]", "links[0].frming: an unknown key; wanted one of name, capacity_kbps"),
        ("frming: [ppp]", 'Did you mean "framing"?'),
        ("name: 12", "links[0].name: 12; wanted a name"),
        ("name: ''", "links[0].name"),
        ("capacity_kbps: -3", "links[0].capacity_kbps: -3; wanted kbit/s"),
        ("capacity_kbps: .nan", "links[0].capacity_kbps: nan; wanted kbit/s"),
        ("capacity_kbps: .inf", "links[0].capacity_kbps: inf; wanted kbit/s"),
        ("capacity_kbps: 1e3", 'links[0].capacity_kbps: "1e3"; wanted kbit/s'),
        ("capacity_kbps: yes", "links[0].capacity_kbps: yes; wanted kbit/s"),
        (f"capacity_kbps: {'9' * 5000}", "links[0].capacity_kbps"),
        ("capacity_kbps: {to_site: 5}", "links[0].capacity_kbps: no from_site; wanted kbit/s"),
        ("capacity_kbps: {to_site: 5, from_site: x}", 'capacity_kbps.from_site: "x"; wanted'),
        ("call: {codec: G999}", 'links[0].call.codec: "G999"; wanted one of PCMU'),
        ("call: {codec: 729}", "links[0].call.codec: 729; wanted a codec's name"),
        ("call: {codec: G729, packet_ms: 25}", "call.packet_ms: 25 ms; wanted a whole multiple"),
        ("call: {packet_ms: .inf}", "call.packet_ms: inf ms; wanted a whole multiple"),
        ("call: {packet_ms: x}", 'call.packet_ms: "x"; wanted milliseconds'),
        ("call: {marking: EE}", 'links[0].call.marking: "EE"; wanted a DSCP name'),
        ("call: {marking: 64}", "links[0].call.marking: 64; wanted a DSCP name"),
        ("call: {srtp_tag_octets: 1.5}", "call.srtp_tag_octets: 1.5; wanted octets"),
        ("call: {silence_suppression: 1}", "call.silence_suppression: 1; wanted yes or no"),
        ("call: 3", "links[0].call: 3; wanted a call"),
        ("budget: {calls: 0}", "links[0].budget.calls: 0; wanted a whole number of calls"),
        ("budget: {calls: 1.5}", "links[0].budget.calls: 1.5; wanted a whole number"),
        ("budget: {calls: 2, reserve_calls: 3}", "reserve_calls: 3; wanted no more than the 2"),
        ("budget: {share_percent: 33}", "share_percent: 33.0; wanted a link whose capacity_kbps"),
        ("budget: {kbps: 5, share_percent: 3}, capacity_kbps: 9", "not both"),
        ("site_prefixes: [10.1.2.3/8]", 'site_prefixes[0]: "10.1.2.3/8"; wanted a network'),
        ("site_prefixes: [10.1.2.3/8]", "Did you mean 10.0.0.0/8?"),
        ("site_prefixes: 10.0.0.0/8", 'site_prefixes: "10.0.0.0/8"; wanted a list of networks'),
        ("site_prefixes: [7]", "site_prefixes[0]: 7; wanted a network"),
    ],
)
def test_a_fault_names_line_key_value_and_what_is_right(plan_of, keys, said):
    """One line, with everything needed to mend it."""
    with pytest.raises(PlanError) as refusal:
        plan_of(f"site: x\nlinks:\n  - {{{keys}}}\n")
    assert str(refusal.value).startswith("kiln.yaml line 3, links[0]")
    assert said in str(refusal.value)
    assert len(str(refusal.value)) < 400


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "line 1: nothing; wanted one of site, links"),
        ("just words", 'line 1: "just words"; wanted one of site, links'),
        ("site: x", "line 1: no links; wanted a list of 1 to 64 links"),
        ("links: []", "line 1, links: a list; wanted a list of 1 to 64 links"),
        ("links: {}", "line 1, links: a group of keys; wanted a list of 1 to 64 links"),
        ("links: [3]", "line 1, links[0]: 3"),
        ("links: [{name: a}, {name: b}, {name: a}]", 'links[2].name: "a"; wanted a name that no'),
        ("links: [{}]\npayload_types: {72: PCMU}", "line 2, payload_types.72"),
        ("links: [{}]\npayload_types: {128: PCMU}", "line 2, payload_types.128"),
        ("links: [{}]\npayload_types: {x: PCMU}", "line 2, payload_types.x"),
        ("links: [{}]\npayload_types: {97: tape}", 'payload_types.97: "tape"; wanted one of PCMU'),
        ("links: [{}]\npayload_types: {97: 3}", "payload_types.97: 3; wanted a codec's name"),
        ("links: [{}]\npayload_types: 3", "payload_types: 3; wanted payload types"),
        ("links: [{}]\nalarms: {jitter_ms: 0}", "line 2, alarms.jitter_ms: 0; wanted milli"),
        ("links: [{}]\nacceptance: [{name: a, want: {}}]", "acceptance[0].want: nothing asked"),
        ("links: [{}]\nacceptance: [{name: a}]", "acceptance[0]: no want; wanted what is asked"),
        ("links: [{}]\nacceptance: [{name: a, want: {mos: 6}}]", "want.mos: 6; wanted a mean"),
        ("links: [{}]\nacceptance: 3", "line 2, acceptance: 3; wanted a list"),
    ],
)
def test_a_fault_outside_the_links_is_told_alike(plan_of, text, said):
    """No part of a plan has errors of another kind."""
    with pytest.raises(PlanError) as refusal:
        plan_of(text)
    assert said in str(refusal.value)


def test_of_several_faults_the_first_is_told_and_the_rest_counted(plan_of):
    """The first by line, with how many more there are."""
    with pytest.raises(PlanError) as refusal:
        plan_of("alarms: {mos: 9}\nlinks:\n  - {frming: [ppp], capacity_kbps: 0}\nsite: 3\n")
    assert str(refusal.value).startswith("kiln.yaml line 1, alarms.mos: 9")
    assert "and 3 more" in str(refusal.value)


def test_a_file_is_read_by_its_name(tmp_path):
    """Errors name the file as it was given; a byte-order mark does no harm."""
    file = tmp_path / "kiln.yaml"
    file.write_text(WHOLE, encoding="utf-8-sig")
    assert load_plan(file).site == "Kiln Lane depot"
    file.write_text("links: [", encoding="utf-8")
    with pytest.raises(PlanError, match=r"kiln\.yaml line \d"):
        load_plan(file)


def make_pipe(path):
    """Makes a pipe that nobody writes to."""
    os.mkfifo(path)


@pytest.mark.parametrize(
    ("make", "said"),
    [
        (lambda path: path.mkdir(), "a directory; wanted a plan file"),
        (make_pipe, "a pipe or a device; wanted a plan file"),
        (lambda path: path.write_bytes("site: Düne".encode("utf-16")), "wanted UTF-8 text"),
        (lambda path: path.write_bytes(b"#" * 1_000_001), "wanted 1,000,000 at most"),
        (lambda path: path.write_bytes(b"site: \x00"), "wanted YAML"),
        (lambda path: None, "no such file or directory"),
    ],
)
def test_what_is_no_plan_file_is_refused(tmp_path, make, said):
    """Nothing is waited for, and nothing large is read."""
    make(tmp_path / "kiln.yaml")
    with pytest.raises(PlanError) as refusal:
        load_plan(tmp_path / "kiln.yaml")
    assert said in str(refusal.value)


def test_a_device_and_an_impossible_name_are_refused():
    """A device has no end; a name with a zero octet is none."""
    for path in (Path("/dev/zero"), Path("kiln\0.yaml")):
        with pytest.raises(PlanError):
            load_plan(path)


PLAIN_VALUES = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=8),
    lambda inner: (
        st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=8), inner, max_size=3)
    ),
    max_leaves=8,
)
KEYS = st.sampled_from(
    [
        "site",
        "links",
        "name",
        "capacity_kbps",
        "framing",
        "site_prefixes",
        "budget",
        "call",
        "codec",
        "packet_ms",
        "marking",
        "payload_types",
        "alarms",
        "acceptance",
        "want",
        "97",
    ]
)
PLAN_LIKE = st.recursive(
    PLAIN_VALUES | st.sampled_from(["G729", "ppp", "EF", "10.0.0.0/8"]),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(KEYS, inner, max_size=4),
    max_leaves=12,
)


@given(PLAN_LIKE)
def test_any_values_make_a_plan_or_one_clear_error(values):
    """Whatever a file holds, a person is told in one line."""
    import yaml

    text = yaml.safe_dump(values, allow_unicode=True)
    try:
        parse_plan(text, "kiln.yaml")
    except PlanError as error:
        assert str(error).startswith("kiln.yaml")


@given(st.text(max_size=200))
def test_any_text_makes_a_plan_or_one_clear_error(text):
    """The same for text that is not even YAML."""
    try:
        parse_plan(text, "kiln.yaml")
    except PlanError as error:
        assert str(error).startswith("kiln.yaml")


@pytest.mark.parametrize("file", sorted(CONFIG.glob("*.yaml")), ids=lambda file: file.name)
def test_the_example_plans_have_nothing_against_them(file):
    """Every example can be read, and its figures fit together."""
    assert [doubts(link) for link in load_plan(file).links] == [[] for _ in load_plan(file).links]
