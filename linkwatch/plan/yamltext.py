"""Plan text -> plain values, and the line that each stands on.

A plan is small and plain. What only an accident or an attack would hold is refused before it costs
memory or time: aliases (which multiply), tags (which make objects), deep nesting, thousands of
values, a key given twice. Numbers are read as people mean them: "010" is no eight and "1:30" no
ninety.
"""

import re
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from linkwatch.errors import PlanError
from linkwatch.plan.wording import quoted

Path = tuple[str | int, ...]  # the keys and indexes that lead to a value

MOST_CHARACTERS = 1_000_000
MOST_VALUES = 20_000
MOST_DEPTH = 16
MOST_DIGITS = 40

_INTEGER = re.compile(r"[-+]?(0|[1-9][0-9]*)")
_DECIMAL = re.compile(r"[-+]?([0-9]+\.[0-9]*|\.[0-9]+)([eE][-+]?[0-9]+)?")
_WORDS = {"": None, "~": None, "null": None, "true": True, "yes": True, "false": False, "no": False}
_WORDS_OF_FLOAT = (".inf", "+.inf", "-.inf", ".nan")


@dataclass(frozen=True, slots=True)
class PlanText:
    """A plan as it was written.

    Attributes:
        source: What errors call it.
        values: Mappings by text, tuples and single values.
        lines: The line of each key or list entry, from 1, by the path to it.
    """

    source: str
    values: object
    lines: dict[Path, int]

    def line(self, path: Path) -> int:
        """Returns the line of a value, or of the nearest thing around it that has one."""
        known = (self.lines.get(path[:length]) for length in range(len(path), -1, -1))
        return next((line for line in known if line), 1)

    def error(self, path: Path, *, got: str = "", wanted: str = "", remedy: str = "") -> PlanError:
        """Returns an error about the value at a path."""
        what = f"{self.source} line {self.line(path)}"
        if path:
            what += f", {dotted(path)}"
        return PlanError(what, got=got, wanted=wanted, remedy=remedy)


def dotted(path: Path) -> str:
    """Returns a path as people write it, such as "links[0].framing[1]"."""
    steps = [f"[{step}]" if isinstance(step, int) else f".{step[:MOST_DIGITS]}" for step in path]
    return "".join(steps).removeprefix(".")


def read_text(text: str, source: str) -> PlanText:
    """Returns what a plan's text holds.

    Args:
        text: YAML.
        source: What errors call it.

    Raises:
        PlanError: It is no YAML, or holds what no plan needs.
    """
    import yaml

    if len(text) > MOST_CHARACTERS:
        wanted = f"{MOST_CHARACTERS:,} at most"
        raise PlanError(source, got=f"{len(text):,} characters", wanted=wanted)
    parser = getattr(yaml, "CSafeLoader", yaml.SafeLoader)  # the same, and much faster
    reader = _Reader(source)
    try:
        values = reader.document(yaml.parse(text, Loader=parser))
    except yaml.MarkedYAMLError as error:
        mark = error.problem_mark
        where = f"{source} line {mark.line + 1}" if mark else source
        raise PlanError(where, got=f"{error.problem}", wanted="YAML") from None
    except (yaml.YAMLError, UnicodeError) as error:
        got = getattr(error, "reason", "signs that cannot be read")
        raise PlanError(source, got=got, wanted="YAML, as UTF-8 text") from None
    return PlanText(source, values, reader.lines)


class _Reader:
    """Builds values from the events of a YAML parser."""

    def __init__(self, source: str) -> None:
        self.lines: dict[Path, int] = {}
        self._source = source
        self._seen = 0

    def document(self, events: Iterator[Any]) -> object:
        """Returns the one document's value, None where there is none."""
        import yaml

        documents: list[object] = []
        for event in events:
            if isinstance(event, yaml.DocumentStartEvent):
                if documents:
                    raise self._fault(event, (), "a second document", "one plan a file")
                documents.append(self._value(events, next(events), ()))
        return documents[0] if documents else None

    def _value(self, events: Iterator[Any], event: Any, path: Path) -> object:  # noqa: ANN401
        import yaml

        self._refuse(event, path)
        if isinstance(event, yaml.MappingStartEvent):
            return self._mapping(events, path)
        if isinstance(event, yaml.SequenceStartEvent):
            return self._sequence(events, path)
        return _scalar(event.value) if event.implicit[0] else event.value

    def _mapping(self, events: Iterator[Any], path: Path) -> dict[str, object]:
        import yaml

        found: dict[str, object] = {}
        for event in events:
            if isinstance(event, yaml.MappingEndEvent):
                break
            self._refuse(event, path)
            if not isinstance(event, yaml.ScalarEvent):
                raise self._fault(event, path, "a list or group as a key", "a word")
            key = event.value
            here = (*path, key)
            if key in found:
                earlier = f"It stands on line {self.lines[here]} already."
                raise self._fault(event, here, "the key a second time", "each key once", earlier)
            self.lines[here] = _line(event)
            found[key] = self._value(events, next(events), here)
        return found

    def _sequence(self, events: Iterator[Any], path: Path) -> tuple[object, ...]:
        import yaml

        found: list[object] = []
        for event in events:
            if isinstance(event, yaml.SequenceEndEvent):
                break
            here = (*path, len(found))
            self.lines[here] = _line(event)
            found.append(self._value(events, event, here))
        return tuple(found)

    def _refuse(self, event: Any, path: Path) -> None:  # noqa: ANN401 - yaml has no types for it
        """Raises PlanError for what no plan needs."""
        import yaml

        self._seen += 1
        if self._seen > MOST_VALUES:
            raise self._fault(event, path, f"more than {MOST_VALUES:,} values", "a smaller plan")
        if len(path) > MOST_DEPTH:
            wanted = f"{MOST_DEPTH} levels at most"
            raise self._fault(event, path[:1], "values inside values without end", wanted)
        if isinstance(event, yaml.AliasEvent):
            raise self._fault(event, path, "an alias (*)", "the value itself, written out")
        if event.tag is not None:
            raise self._fault(event, path, f"the tag {quoted(event.tag)}", "a value without a tag")

    def _fault(
        self,
        event: Any,  # noqa: ANN401
        path: Path,
        got: str,
        wanted: str,
        remedy: str = "",
    ) -> PlanError:
        where = f"{self._source} line {_line(event)}"
        what = f"{where}, {dotted(path)}" if path else where
        return PlanError(what, got=got, wanted=wanted, remedy=remedy)


def _line(event: Any) -> int:  # noqa: ANN401
    line: int = event.start_mark.line
    return line + 1


def _scalar(text: str) -> object:
    """Returns the value of a word that stands without quotes."""
    low = text.lower()
    if low in _WORDS:
        return _WORDS[low]
    if len(text) <= MOST_DIGITS:
        if _INTEGER.fullmatch(text):
            return int(text)
        if _DECIMAL.fullmatch(text):
            return float(text)
    if low in _WORDS_OF_FLOAT:
        return float(low.replace(".", ""))
    return text
