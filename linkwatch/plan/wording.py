"""How an error quotes what it found, and what it offers instead."""

from collections.abc import Iterable
from difflib import get_close_matches

MOST_QUOTED = 40  # signs of what was found: enough to find it again, and one line stays one line


def quoted(value: object) -> str:
    """Returns what was found, as an error shows it: in quotes, and cut short where it is long."""
    if isinstance(value, dict):
        return "a group of keys"
    if isinstance(value, list | tuple):
        return "a list"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if value is None:
        return "nothing"
    if isinstance(value, int) and abs(value) >= 10**MOST_QUOTED:
        return f"a number of more than {MOST_QUOTED} digits"
    text = str(value)
    cut = text if len(text) <= MOST_QUOTED else text[:MOST_QUOTED] + "..."
    return f'"{cut}"' if isinstance(value, str) else cut


def one_of(values: Iterable[object]) -> str:
    """Returns the values that are allowed, as an error lists them."""
    shown = ["yes" if v is True else "no" if v is False else str(v) for v in values]
    return shown[0] if len(shown) == 1 else f"one of {', '.join(shown)}"


def nearest(name: str, names: Iterable[str]) -> str:
    """Returns a remedy that offers the right name nearest to a wrong one, or ""."""
    close = get_close_matches(name[:MOST_QUOTED], list(names), n=1, cutoff=0.6)
    return f'Did you mean "{close[0]}"?' if close else ""
