"""Markings by name and number."""

import pytest

from linkwatch.errors import InputError
from linkwatch.plan.marking import DSCP_NAMES, dscp_of, marking_name


@pytest.mark.parametrize(
    ("name", "dscp"),
    [
        ("EF", 46),
        ("AF31", 26),
        ("AF11", 10),
        ("AF43", 38),
        ("CS5", 40),
        ("CS0", 0),
        ("LE", 1),
        ("VOICE-ADMIT", 44),
        ("ef", 46),
        (" EF ", 46),
        ("BE", 0),
    ],
)
def test_names_are_the_published_values(name, dscp):
    """RFC 2474 4.2.2, RFC 2597 6, RFC 3246, RFC 5865 and RFC 8622."""
    assert dscp_of(name) == dscp


def test_every_name_comes_back_to_its_value():
    """Naming and reading are one another's reverse."""
    assert all(dscp_of(name) == dscp for dscp, name in DSCP_NAMES.items())


@pytest.mark.parametrize("dscp", range(64))
def test_every_value_can_be_said(dscp):
    """A value without a name is shown as its number."""
    assert dscp_of(dscp) == dscp
    assert marking_name(dscp) in (DSCP_NAMES.get(dscp), str(dscp))


@pytest.mark.parametrize("marking", [64, -1, "EE", "", True, 4.5, None, [], 10**50])
def test_what_is_no_marking_is_refused(marking):
    """The error says what would be."""
    with pytest.raises(InputError, match="a DSCP name such as EF"):
        dscp_of(marking)
