"""The plan file's page holds every key, layer, option and codec there is."""

from pathlib import Path

import pytest

from linkwatch.plan.codecs import codecs
from linkwatch.plan.layers import LAYERS
from linkwatch.plan.layers.layer import options_of
from linkwatch.plan.model import (
    AlarmLimits,
    BudgetPlan,
    CallPlan,
    Capacity,
    Criterion,
    LinkPlan,
    Plan,
    Want,
)
from linkwatch.plan.planfile import parse_plan

DOCS = Path(__file__).parents[2] / "docs"
PAGE = (DOCS / "plan-file.md").read_text(encoding="utf-8")
FIGURES = (DOCS / "figures.md").read_text(encoding="utf-8")


@pytest.mark.parametrize(
    "part", [Plan, LinkPlan, Capacity, BudgetPlan, CallPlan, AlarmLimits, Criterion, Want]
)
def test_every_key_is_explained(part):
    """A key that is not on the page does not exist for people."""
    keys = part.keys()
    assert [key for key in keys if f"`{key}`" not in PAGE] == []
    assert all(field.description for field in part.model_fields.values())


@pytest.mark.parametrize("name", LAYERS)
def test_every_layer_and_option_is_explained(name):
    """On its own line, and derived in the figures."""
    (line,) = [line for line in PAGE.splitlines() if line.startswith(f"| `{name}` |")]
    assert [option for option in options_of(LAYERS[name]) if f"`{option}`" not in line] == []
    assert f"\n| {name}" in FIGURES


def test_every_codec_and_alias_is_named():
    """All names that are understood."""
    names = [name for codec in codecs().values() for name in (codec.name, *codec.aliases)]
    assert [name for name in names if f"`{name}`" not in PAGE] == []


def test_the_example_on_the_page_is_a_plan():
    """What people copy works."""
    example = PAGE.split("```yaml\n")[1].split("```")[0]
    assert parse_plan(example, "the page").site == "Kiln Lane depot"


def test_the_page_says_what_the_limits_are_not_for():
    """Emergency calls, and no guarantee."""
    assert "must never refuse an emergency call" in PAGE
    assert "no guarantee" in PAGE
