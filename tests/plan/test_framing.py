"""Framings: one definition for one packet and for columns of them, and stacks that cannot be."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from linkwatch.plan.framing import Framing, LayerError, make_framing, parse_framing
from linkwatch.plan.layers import LAYERS, make_layer
from linkwatch.plan.layers.layer import options_of

ANY_LAYER = st.sampled_from(sorted(LAYERS)).flatmap(
    lambda name: st.fixed_dictionaries(
        {},
        optional={
            option: st.sampled_from(allowed) for option, allowed in options_of(LAYERS[name]).items()
        },
    ).map(lambda options: make_layer(name, options))
)


def stack_or_none(layers):
    """Returns the framing of layers, or None where they cannot be put so."""
    try:
        return Framing(tuple(layers))
    except LayerError:
        return None


ANY_FRAMING = st.lists(ANY_LAYER, max_size=4).map(stack_or_none).filter(bool)


@given(
    ANY_FRAMING, st.lists(st.tuples(st.integers(32, 9000), st.sampled_from([20, 40])), min_size=1)
)
def test_a_column_of_packets_costs_what_each_of_them_costs(framing, packets):
    """The engine's arithmetic and the planner's are one."""
    octets, headers = np.array(packets, dtype=np.int64).T
    octets = octets + headers
    column = framing.link_octets(octets, headers)
    assert column.dtype == np.int64
    assert column.tolist() == [
        framing.link_octets(int(o), int(h)) for o, h in zip(octets, headers, strict=True)
    ]


@given(ANY_FRAMING, st.integers(60, 9000))
def test_a_longer_packet_never_costs_less(framing, octets):
    """Padding and cells may swallow an octet, and never give one back."""
    assert framing.link_octets(octets + 1) >= framing.link_octets(octets)


@given(ANY_FRAMING, st.integers(60, 9000), st.sampled_from([20, 40]))
def test_the_steps_lead_to_the_link(framing, octets, header):
    """What people are shown layer by layer ends at what is counted."""
    steps = framing.steps(octets, header)
    assert [step.layer for step in steps] == [layer.name for layer in framing.layers]
    assert all(step.account for step in steps)
    last = steps[-1].octets if steps else octets
    assert last == framing.link_octets(octets, header)
    assert type(last) is int


@given(st.lists(ANY_LAYER, max_size=6))
def test_any_layers_make_a_framing_or_one_clear_error(layers):
    """A stack that cannot be says which layer is the matter."""
    framing = stack_or_none(layers)
    if framing is None:
        with pytest.raises(LayerError) as refusal:
            Framing(tuple(layers))
        assert 0 <= refusal.value.index < len(layers)
        assert f"layer {refusal.value.index + 1}" in str(refusal.value)


@given(st.text(max_size=60))
def test_any_words_make_a_framing_or_one_clear_error(text):
    """The command line takes whatever is typed."""
    try:
        parse_framing(text)
    except LayerError as error:
        assert "\n" not in str(error)


def test_equal_framings_are_one_key():
    """A framing can be looked up."""
    assert {parse_framing("crtp,ppp"): 1}[make_framing(["crtp", {"ppp": {"flags": 1}}])] == 1


@pytest.mark.parametrize("spec", [[], ["ip"]])
def test_no_layers_are_the_bare_ip_packet(spec):
    """An empty list and "ip" both say so."""
    assert make_framing(spec).link_octets(60) == 60
    assert str(make_framing(spec)) == "ip"


def test_a_framing_is_said_with_the_options_that_matter():
    """Defaults are left out."""
    spec = ["crtp", {"ppp": {"flags": 2, "acfc": False}}]
    assert str(make_framing(spec)) == "crtp, ppp (flags 2)"


@pytest.mark.parametrize(
    ("words", "spec"),
    [
        ("crtp,ppp", ["crtp", "ppp"]),
        (" CRTP , ppp ", ["crtp", "ppp"]),
        ("ppp:flags=2:acfc=yes", [{"ppp": {"flags": 2, "acfc": True}}]),
        ("esp:cipher=aes-gcm,ethernet", [{"esp": {"cipher": "aes-gcm"}}, "ethernet"]),
        ("ip", []),
        ("", []),
    ],
)
def test_the_command_line_says_what_a_plan_says(words, spec):
    """Options follow their layer after colons."""
    assert parse_framing(words) == make_framing(spec)


def test_the_minimum_frame_counts_tags_labels_and_sessions_inside_it():
    """A tagged frame is 64 octets at least, tag included (IEEE 802.3 3.2.8)."""
    tiny = 42
    assert make_framing(["ethernet"]).link_octets(tiny) == 64
    assert make_framing(["vlan", "ethernet"]).link_octets(tiny) == 64
    assert make_framing(["mpls", "ethernet"]).link_octets(tiny) == 64
    assert make_framing(["pppoe", "ethernet"]).link_octets(tiny) == 68


def test_a_tag_put_on_a_made_frame_keeps_its_padding():
    """Listed after ethernet, a tag makes the shortest frame 68 octets; longer ones are the same."""
    assert make_framing(["ethernet", "vlan"]).link_octets(42) == 68
    assert make_framing(["ethernet", "vlan"]).link_octets(200) == 222


def test_a_bridged_frame_leaves_padding_behind_with_its_check_sequence():
    """Without FCS the padding may be omitted, with it not (RFC 2684 5.2)."""
    assert make_framing(["ethernet", "aal5"]).link_octets(44) == 2 * 53
    assert make_framing(["ethernet", {"aal5": {"fcs": True}}]).link_octets(40) == 2 * 53
    cut, whole = {"encapsulation": "vc-mux"}, {"encapsulation": "vc-mux", "fcs": True}
    assert make_framing(["ethernet", {"aal5": cut}]).link_octets(24) == 53
    assert make_framing(["ethernet", {"aal5": whole}]).link_octets(24) == 2 * 53


def test_ipv6_takes_the_longer_frame_relay_header():
    """IPv4 has an identifier of its own, IPv6 needs the EtherType's header (RFC 2427 4.1)."""
    framing = make_framing(["frame-relay"])
    assert framing.link_octets(60, 20) == 67
    assert framing.link_octets(80, 40) == 93


def test_compressed_headers_cost_the_same_whatever_the_ip_version():
    """IP, UDP and RTP headers all become two octets."""
    framing = make_framing(["crtp", "ppp"])
    assert framing.link_octets(60, 20) == framing.link_octets(80, 40) == 29


@pytest.mark.parametrize(
    ("words", "reason"),
    [
        ("ppp,crtp", "list it first"),
        ("gre,crtp", "list it first"),
        ("crtp,crtp", "list it first"),
        ("crtp,gre", "one hop only"),
        ("crtp,esp", "one hop only"),
        ("crtp,ipip", "one hop only"),
        ("crtp,ethernet", "one hop only"),
        ("ppp,ethernet", "nothing more, or aal5"),
        ("ethernet,ppp", "nothing more, or one of aal5, vlan"),
        ("hdlc,ppp", "it is finished"),
        ("aal5,ethernet", "it is finished"),
        ("ethernet:gap=yes,aal5", "it is finished"),
        ("ethernet,pppoe", "from the IP packet outwards"),
        ("vlan,ppp", "one of ethernet, vlan"),
        ("vlan", "one of ethernet, vlan around a tagged packet"),
        ("pppoe", "around a PPPoE session's packet"),
        ("mlppp", "around a multilink fragment"),
        ("crtp", "around a packet with compressed headers"),
        ("mpls", "around a labelled packet"),
        ("pp", 'Did you mean "ppp"'),
        ("ppp:flags=3", "ppp.flags 3; wanted one of 1, 2"),
        ("ppp:flags=yes", "ppp.flags yes; wanted one of 1, 2"),
        ("ppp:acfc=1", "ppp.acfc 1; wanted one of no, yes"),
        ("ppp:flgs=1", 'Did you mean "flags"'),
        ("ppp:flags", "option=value"),
        ("pppoe:flags=1", "it has no options"),
        ("ip,ppp", '"ip"; wanted one of'),
        (",".join(["gre"] * 13), "12 at most"),
    ],
)
def test_what_cannot_be_is_refused_with_the_reason(words, reason):
    """The error names the layer, and what would be right or why it is not."""
    with pytest.raises(LayerError) as refusal:
        parse_framing(words)
    assert reason in str(refusal.value)


@pytest.mark.parametrize(
    "entry", [3, None, {}, {"ppp": {}, "gre": {}}, {"ppp": 3}, ["ppp"], {3: {}}]
)
def test_what_is_no_layer_is_refused(entry):
    """A plan may hold anything."""
    with pytest.raises(LayerError, match=r"layer 1: .*wanted"):
        make_framing([entry])
