"""Builders: a test takes only what it cares about."""

from pathlib import Path

import pytest
import yaml

from linkwatch.plan.planfile import parse_plan


def published(name):
    """Returns the check values of a file beside the tests."""
    return yaml.safe_load((Path(__file__).parent / f"{name}.yaml").read_text(encoding="utf-8"))


def pytest_generate_tests(metafunc):
    """Hands a published figure to each test that asks for one."""
    for wanted in ("published_cost", "published_codec"):
        if wanted in metafunc.fixturenames:
            entries = published(f"{wanted}s")
            names = [str(entry.get("id") or entry["codec"]) for entry in entries]
            metafunc.parametrize(wanted, entries, ids=names)


@pytest.fixture
def plan_of():
    """Builds a plan from its text; {} is replaced by the keys of its one link."""

    def build(text):
        return parse_plan(text, "kiln.yaml")

    return build


@pytest.fixture
def link_of(plan_of):
    """Builds a link from its keys, in flow style."""

    def build(keys=""):
        return plan_of(f"links: [{{{keys}}}]").links[0]

    return build
