"""YAML as plans use it: plain values with their lines, and nothing that costs memory or time."""

import pytest

from linkwatch.errors import PlanError
from linkwatch.plan.yamltext import read_text


def values(text):
    """Returns what a text holds."""
    return read_text(text, "kiln.yaml").values


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("a: 12", 12),
        ("a: -3", -3),
        ("a: 1.5", 1.5),
        ("a: .inf", float("inf")),
        ("a: yes", True),
        ("a: False", False),
        ("a:", None),
        ("a: ~", None),
        ("a: '12'", "12"),
        ("a: 010", "010"),
        ("a: 1:30", "1:30"),
        ("a: 0x1F", "0x1F"),
        ("a: 1_000", "1_000"),
        ("a: 2026-01-31", "2026-01-31"),
        ("a: on", "on"),
        ("a: 2001:db8::/32", "2001:db8::/32"),
        (f"a: {'9' * 5000}", "9" * 5000),
    ],
)
def test_words_are_read_as_people_mean_them(text, value):
    """What only a machine would take for a number stays a word."""
    assert values(text) == {"a": value}


def test_each_value_knows_its_line():
    """Lines are counted from 1, for keys and for list entries."""
    text = read_text("a:\n  - b\n  - {c: 1,\n     d: 2}\n", "kiln.yaml")
    assert [text.line(path) for path in [("a",), ("a", 0), ("a", 1), ("a", 1, "d")]] == [1, 2, 3, 4]
    assert text.line(("a", 1, "unknown")) == 3


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("a: &x [1]\nb: *x", "line 2, b: an alias"),
        ("a: &x [*x]", "an alias"),
        ("<<: *x", "unknown alias|an alias|undefined"),
        ("a: !!python/object/apply:os.system [ls]", "the tag"),
        ("a: !!binary aGk=", "the tag"),
        ("a: 1\nb: 2\na: 3", "line 3, a: the key a second time.*line 1"),
        ("a: {b: {c: 1, c: 2}}", "a.b.c: the key a second time"),
        ("? [1]\n: 2", "a list or group as a key"),
        ("a: 1\n---\nb: 2", "line 2: a second document"),
        ("[" * 18 + "]" * 18, "16 levels at most"),
        ("[" * 100_000, "nest|levels"),
        ("{a: " * 900, "nest|levels"),
        ("- " * 100_000, "levels"),
        (f"a: [{'1,' * 100_000}]", "more than 20,000 values"),
        ("a: x\n" * 100_000, "a second time"),
        ("x" * 1_000_001, "1,000,000 at most"),
        ("a: 'b", "line 1.*wanted YAML"),
        ("a: [1", "wanted YAML"),
        ("\ta: 1", "wanted YAML"),
        ("a: \x07", "wanted YAML"),
        ("a: \ud800", "wanted YAML"),
        ("%YAML 9.9\n---\na: 1", "wanted YAML"),
    ],
)
def test_what_no_plan_needs_is_refused_at_once(text, said):
    """One clear line, before memory or time are spent."""
    with pytest.raises(PlanError, match=said) as refusal:
        values(text)
    assert str(refusal.value).startswith("kiln.yaml")
    assert len(str(refusal.value)) < 300


def test_aliases_that_multiply_are_never_followed():
    """Nine levels of ten would be a thousand million values."""
    lines = ["a0: &a0 [x, x, x, x, x, x, x, x, x, x]"]
    lines += [f"a{n}: &a{n} [{', '.join([f'*a{n - 1}'] * 10)}]" for n in range(1, 9)]
    with pytest.raises(PlanError, match=r"line 2.*an alias"):
        values("\n".join(lines))


def test_an_empty_text_holds_nothing():
    """So does one of comments alone."""
    assert values("") is None
    assert values("# nothing yet\n") is None
