"""The cost of a call against the published octets of every layer."""

from fractions import Fraction

import pytest

from linkwatch.errors import InputError
from linkwatch.plan.cost import call_cost
from linkwatch.plan.framing import Framing, make_framing


def test_every_published_total_is_met_to_the_octet(published_cost):
    """Codec, headers and layers add up to the worked total."""
    framing = make_framing(published_cost["framing"])
    if "ip_octets" in published_cost:
        assert framing.link_octets(published_cost["ip_octets"]) == published_cost["octets"]
        return
    cost = call_cost(
        published_cost["codec"],
        published_cost["ms"],
        framing,
        ipv6=published_cost.get("ipv6", False),
        srtp_tag_octets=published_cost.get("tag", 0),
    )
    assert cost.link_octets == published_cost["octets"]
    assert cost.kbps == pytest.approx(float(Fraction(published_cost["kbps"])), rel=1e-12)


def test_a_call_of_the_trade_costs_what_the_trade_says():
    """PCMU 20 ms on Ethernet is 87.2 kbit/s at 50 packets/s: common practice, no source."""
    cost = call_cost("PCMU", 20, make_framing(["ethernet"]))
    assert (cost.payload_octets, cost.ip_octets, cost.link_octets) == (160, 200, 218)
    assert (cost.packets_per_second, cost.kbps) == (50, 87.2)


def test_compression_saves_much_of_small_packets_and_little_of_large_ones():
    """Common practice, no source: much of a G729 call, little of a PCMU call."""
    plain, short = make_framing(["ppp"]), make_framing(["crtp", "ppp"])
    left = {
        c: call_cost(c, 20, short).kbps / call_cost(c, 20, plain).kbps for c in ("G729", "PCMU")
    }
    assert left["G729"] < 0.5
    assert left["PCMU"] > 0.8


def test_packetisation_defaults_to_the_codecs_own():
    """Nobody has to know that G723 has 30 ms frames."""
    assert call_cost("G723", None, Framing()).packet_ms == 30


def test_payload_is_speech_alone_and_the_tag_is_counted_beside_it():
    """An SRTP tag makes the packet longer, not the speech."""
    cost = call_cost("G729", 20, Framing(), srtp_tag_octets=10)
    assert (cost.payload_octets, cost.ip_octets) == (20, 70)


@pytest.mark.parametrize("tag", [-1, 65, 10**9])
def test_a_tag_that_cannot_be_is_refused(tag):
    """The error says what is allowed."""
    with pytest.raises(InputError, match="wanted 0 to 64"):
        call_cost("G729", 20, Framing(), srtp_tag_octets=tag)
