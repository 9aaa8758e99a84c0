"""The plan file: YAML -> Plan. Every error names file, line and key."""

import stat
from pathlib import Path
from typing import get_args

from pydantic import ValidationError
from pydantic_core import ErrorDetails

from linkwatch.errors import InputError, PlanError
from linkwatch.plan.model import (
    AlarmLimits,
    BudgetPlan,
    CallPlan,
    Capacity,
    Criterion,
    LinkPlan,
    NoPlan,
    Part,
    Plan,
    Want,
)
from linkwatch.plan.wording import nearest, one_of, quoted
from linkwatch.plan.yamltext import Path as KeyPath
from linkwatch.plan.yamltext import PlanText, read_text

__all__ = [
    "AlarmLimits",
    "BudgetPlan",
    "CallPlan",
    "Capacity",
    "Criterion",
    "LinkPlan",
    "Plan",
    "Want",
    "default_plan",
    "load_plan",
    "parse_plan",
]

MOST_OCTETS = 1_000_000


def load_plan(path: Path) -> Plan:
    """Returns the plan of a file.

    Raises:
        PlanError: The file cannot be read, or is no plan.
    """
    return parse_plan(_read(path), str(path))


def parse_plan(text: str, source: str) -> Plan:
    """Returns the plan of a text.

    Args:
        text: YAML.
        source: What errors call it.

    Raises:
        PlanError: It is no plan.
    """
    written = read_text(text, source)
    if not isinstance(written.values, dict):
        raise written.error((), got=quoted(written.values), wanted=one_of(Plan.keys()))
    try:
        return Plan.model_validate(written.values)
    except ValidationError as error:
        faults = sorted(
            (_Fault(written, details) for details in error.errors(include_url=False)),
            key=lambda fault: written.line(fault.path),
        )
    raise faults[0].error(more=len(faults) - 1)


def default_plan() -> Plan:
    """Returns the plan that promises nothing: one link of bare Ethernet, and nothing is judged."""
    return NoPlan.model_validate({"site": "no plan", "links": ({},)})


def _read(path: Path) -> str:
    """Returns a file's text; what is no plain small file is refused before it is opened."""
    try:
        found = path.stat()
        if not stat.S_ISREG(found.st_mode):
            kind = "a directory" if stat.S_ISDIR(found.st_mode) else "a pipe or a device"
            raise PlanError(str(path), got=kind, wanted="a plan file")
        with path.open("rb") as file:
            octets = file.read(MOST_OCTETS + 1)
    except OSError as error:
        raise PlanError(str(path), got=(error.strerror or "it cannot be read").lower()) from None
    except ValueError:  # a name that no file can have
        raise PlanError(str(path), got="a name that no file can have") from None
    if len(octets) > MOST_OCTETS:
        wanted = f"{MOST_OCTETS:,} at most"
        raise PlanError(str(path), got=f"more than {MOST_OCTETS:,} octets", wanted=wanted)
    try:
        return octets.decode("utf-8-sig")
    except UnicodeDecodeError:
        raise PlanError(
            str(path),
            got="signs in another encoding",
            wanted="UTF-8 text",
            remedy="Save the plan as UTF-8.",
        ) from None


class _Fault:
    """What pydantic found, as our error says it."""

    def __init__(self, written: PlanText, details: ErrorDetails) -> None:
        self._written = written
        self._details = details
        carried = details.get("ctx", {})
        self._told: InputError | None = carried.get("error")
        self.path: KeyPath = (*details["loc"], *carried.get("path", ()))

    def error(self, more: int) -> PlanError:
        """Returns the error, with how many more there are."""
        path, got, wanted, remedy = self._parts()
        if more:
            remedy = f"{remedy} Correct this and {more} more.".strip()
        return self._written.error(path, got=got, wanted=wanted, remedy=remedy)

    def _parts(self) -> tuple[KeyPath, str, str, str]:
        """Returns the path, what was found there, what is wanted, and the remedy."""
        if self._told is not None:
            return self.path, self._told.got, self._told.wanted, self._told.remedy
        part, wanted = _place(self.path)
        if self._details["type"] == "extra_forbidden":
            keys = part.keys()
            remedy = nearest(str(self.path[-1]), keys)
            return self.path, "an unknown key", one_of(keys), remedy
        if self._details["type"] == "missing":
            return self.path[:-1], f"no {self.path[-1]}", wanted, ""
        return self.path, quoted(self._details["input"]), wanted, ""


def _place(path: KeyPath) -> tuple[type[Part], str]:
    """Returns the part that a path leads to or through, and what is wanted at its end."""
    part: type[Part] = Plan
    inside: type[Part] | None = Plan
    wanted = ""
    for step in path:
        if isinstance(step, int) or inside is None:
            continue
        part = inside
        field = part.field(step)
        wanted = (field and field.description) or ""
        inside = _part_in(field.annotation) if field else None
    return part, wanted


def _part_in(annotation: object) -> type[Part] | None:
    """Returns the part of a plan that a field's type is made of, if it is made of one."""
    if isinstance(annotation, type) and issubclass(annotation, Part):
        return annotation
    return next((part for inner in get_args(annotation) if (part := _part_in(inner))), None)
