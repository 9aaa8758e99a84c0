"""What a plan's own figures say against it."""

import pytest


@pytest.fixture
def doubts_of(link_of):
    """Tells what stands against a link that is right but for the keys given."""
    from linkwatch.plan.review import doubts

    def build(keys):
        return doubts(link_of(f"site_prefixes: [10.0.0.0/8], {keys}"))

    return build


def test_a_link_without_limits_is_beyond_doubt(doubts_of):
    """Nothing promised, nothing broken."""
    assert doubts_of("name: wan") == []


def test_more_calls_than_the_kbit_s_hold_is_told_with_what_fits(doubts_of):
    """The most common slip of a spreadsheet."""
    (doubt,) = doubts_of("budget: {calls: 24, kbps: 660, reserve_calls: 2}")
    assert doubt == "each way: 24 planned calls cost 2092.8 kbit/s, the budget is 660: 7 fit"


def test_a_budget_met_exactly_is_right(doubts_of):
    """Ten calls of 87.2 in 872 kbit/s."""
    assert doubts_of("budget: {calls: 10, kbps: 872, reserve_calls: 1}") == []


def test_the_direction_that_does_not_fit_is_named(doubts_of):
    """The narrow way up, not the wide way down."""
    (doubt,) = doubts_of(
        "capacity_kbps: {to_site: 8000, from_site: 800}, budget: {calls: 10, reserve_calls: 1}"
    )
    assert doubt == "from site: 10 planned calls cost 872.0 kbit/s, the capacity is 800: 9 fit"


@pytest.mark.parametrize(
    ("keys", "said"),
    [
        ("capacity_kbps: 500, budget: {kbps: 600, reserve_calls: 1}", "above the capacity of 500"),
        ("budget: {calls: 3, reserve_calls: 3}", "not one planned call fits beside the reserve"),
        ("budget: {kbps: 50}", "not one planned call fits"),
        ("budget: {calls: 3}", "no reserve: when the budget is full, an emergency call"),
        ("framing: [crtp, ppp], capacity_kbps: 2048", "crtp above about 1.5 Mbit/s"),
        ("site_prefixes: []", "no site prefixes: every stream counts"),
    ],
)
def test_what_does_not_fit_together_is_told(link_of, keys, said):
    """Each doubt is a sentence."""
    from linkwatch.plan.review import doubts

    assert any(said in doubt for doubt in doubts(link_of(keys)))


def test_crtp_on_a_slow_line_is_what_it_is_for(doubts_of):
    """No doubt at 1536 kbit/s."""
    assert doubts_of("framing: [crtp, ppp], capacity_kbps: 1536") == []
