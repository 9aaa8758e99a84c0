"""The house's floors: who may import whom."""

import ast
from pathlib import Path

import pytest

import linkwatch

HOUSE = Path(linkwatch.__file__).parent
FLOOR = {"frames": 0, "errors": 0, "plan": 1, "voice": 2, "tap": 2, "watch": 3}
FLOOR |= {"record": 4, "board": 4, "run": 4, "commands": 5, "cli": 6, "__main__": 7}
STRANGERS = [{"tap", "record"}, {"tap", "board"}, {"record", "board"}, {"voice", "tap"}]
PURE = ("plan", "voice", "watch")
# plan reads its own data file and the plan file, and nothing else of these
IMPURE = {"socket", "threading", "time", "subprocess", "asyncio", "os", "random", "sys"}

MODULES = sorted(HOUSE.rglob("*.py"))


def room(name):
    """Returns the room of a module of ours, such as "voice", else None."""
    parts = name.split(".")
    return parts[1] if parts[0] == "linkwatch" and len(parts) > 1 else None


def imports(module):
    for node in ast.walk(ast.parse(module.read_text())):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.module:
            yield node.module


@pytest.mark.parametrize("module", MODULES, ids=lambda m: str(m.relative_to(HOUSE)))
def test_a_floor_imports_only_from_below(module):
    """No module imports from a floor above its own, nor a room that it may not know."""
    own = module.relative_to(HOUSE).with_suffix("").parts[0]
    for name in imports(module):
        other = room(name)
        if own == "__init__" or other is None or other == own:
            continue
        assert FLOOR[other] <= FLOOR[own], f"{own} imports {name}"
        assert {own, other} not in STRANGERS, f"{own} imports {name}"


@pytest.mark.parametrize(
    "module",
    [m for m in MODULES if m.relative_to(HOUSE).parts[0] in PURE],
    ids=lambda m: str(m.relative_to(HOUSE)),
)
def test_plan_voice_and_watch_are_pure(module):
    """No clock, socket, thread or process in the floors that only compute."""
    used = {name.split(".")[0] for name in imports(module)}
    assert not used & (IMPURE - ({"os"} if module.name == "planfile.py" else set()))


def test_the_monitor_knows_voice_by_its_door_alone():
    """watch/monitor.py imports the listener, and the count of calls at once, only."""
    voice = {name for name in imports(HOUSE / "watch/monitor.py") if room(name) == "voice"}
    assert voice == {"linkwatch.voice.listener"}
