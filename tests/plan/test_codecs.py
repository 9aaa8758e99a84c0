"""Codecs: what a packet of speech holds, and what names mean."""

import contextlib
import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from linkwatch.errors import InputError
from linkwatch.plan.codecs import STATIC_PAYLOAD_TYPES, codecs, find_codec

CODECS = sorted(codecs().values(), key=lambda codec: codec.name)


def test_payload_octets_are_the_published_ones(published_codec):
    """Each packetisation holds the octets that the standard gives."""
    codec = codecs()[published_codec["codec"]]
    found = {ms: codec.payload_octets(ms) for ms in published_codec["octets"]}
    assert found == published_codec["octets"]
    assert codec.sid_octets == published_codec.get("sid")


@given(st.sampled_from(CODECS), st.integers(1, 3))
def test_twice_the_packetisation_is_twice_the_octets(codec, frames):
    """Speech grows with its length, and by nothing else."""
    once = codec.payload_octets(frames * codec.frame_ms)
    assert codec.payload_octets(2 * frames * codec.frame_ms) == 2 * once
    assert isinstance(once, int)


@given(st.sampled_from(CODECS), st.floats())
def test_any_packetisation_gives_octets_or_one_clear_error(codec, packet_ms):
    """A float that is no multiple of the frame is refused, whatever it is."""
    octets = None
    with contextlib.suppress(InputError):
        octets = codec.payload_octets(packet_ms)
    if octets is not None:
        assert math.isclose(octets / codec.frame_octets * codec.frame_ms, packet_ms, abs_tol=1e-5)


def test_half_a_frame_is_refused_with_the_frame_named():
    """The error says what would be right."""
    with pytest.raises(InputError, match=r"G729: 25 ms; wanted a whole multiple of its 10 ms"):
        find_codec("G729").payload_octets(25)


def test_packets_may_be_as_long_as_a_receiver_must_take():
    """200 ms, or the next whole frame after it (RFC 3551 4.2)."""
    assert find_codec("G729").payload_octets(200) == 200
    assert find_codec("G723").payload_octets(210) == 7 * 24
    with pytest.raises(InputError, match="up to 210 ms"):
        find_codec("G723").payload_octets(240)


@pytest.mark.parametrize(
    ("name", "packet_ms"), [("PCMU", 20), ("G729", 20), ("G723-5.3", 30), ("ILBC-30", 30)]
)
def test_default_packetisation_is_20_ms_or_one_longer_frame(name, packet_ms):
    """RFC 3551 4.2."""
    assert codecs()[name].default_packet_ms == packet_ms


@pytest.mark.parametrize(
    ("said", "meant"),
    [
        ("pcmu", "PCMU"),
        ("G.711U", "PCMU"),
        ("alaw", "PCMA"),
        ("g711a", "PCMA"),
        ("G729A", "G729"),
        ("G.729", "G729"),
        ("G723.1", "G723-6.3"),
        ("g723", "G723-6.3"),
        ("G.723.1-5.3", "G723-5.3"),
        ("GSM-FR", "GSM"),
        ("iLBC-20", "ILBC-20"),
        ("G721", "G726-32"),
    ],
)
def test_names_of_open_standards_are_understood(said, meant):
    """Case, dots and the standard's own name do not matter."""
    assert find_codec(said).name == meant


@pytest.mark.parametrize(
    ("packet_ms", "mode"), [(None, 30), (20, 20), (30, 30), (60, 20), (90, 30)]
)
def test_packetisation_tells_the_mode_of_ilbc(packet_ms, mode):
    """Multiples of 30 ms that are none of 20 are the 30 ms mode; alone it is the default."""
    assert find_codec("ILBC", packet_ms).name == f"ILBC-{mode}"


def test_unknown_codec_is_refused_with_all_known_ones():
    """The error lists the names and offers the nearest."""
    with pytest.raises(InputError) as refusal:
        find_codec("G728")
    assert all(name in str(refusal.value) for name in codecs())
    assert "Did you mean" in str(refusal.value)


def test_every_name_and_alias_finds_its_codec():
    """No alias shadows another codec."""
    for codec in CODECS:
        assert all(find_codec(name) is codec for name in (codec.name, *codec.aliases))


def test_static_payload_types_are_those_of_the_profile():
    """RFC 3551 tables 4 and 5: spot checks, and no number that it leaves free."""
    assert STATIC_PAYLOAD_TYPES[18] == ("G729", 8000, "audio")
    assert STATIC_PAYLOAD_TYPES[9].clock_hz == 8000
    assert STATIC_PAYLOAD_TYPES[16] == ("DVI4", 11025, "audio")
    assert STATIC_PAYLOAD_TYPES[34] == ("H263", 90000, "video")
    assert set(STATIC_PAYLOAD_TYPES) == {0, *range(3, 19), 25, 26, 28, 31, 32, 33, 34}


def test_codecs_agree_with_the_static_payload_types():
    """A codec's static type, its family and its clock are the profile's."""
    for codec in CODECS:
        if codec.payload_type is not None:
            static = STATIC_PAYLOAD_TYPES[codec.payload_type]
            assert (static.name, static.clock_hz) == (codec.family, codec.clock_hz)
