"""Markings: the names of the DSCP values."""

from collections.abc import Mapping
from types import MappingProxyType

from linkwatch.errors import InputError
from linkwatch.plan.wording import quoted

HIGHEST_DSCP = 63  # the field has six bits (RFC 2474 3)

# CSn: RFC 2474 4.2.2. AFxy: RFC 2597 6. EF: RFC 3246. VOICE-ADMIT: RFC 5865. LE: RFC 8622.
DSCP_NAMES: Mapping[int, str] = MappingProxyType(
    {8 * n: f"CS{n}" for n in range(8)}
    | {8 * x + 2 * y: f"AF{x}{y}" for x in range(1, 5) for y in range(1, 4)}
    | {1: "LE", 44: "VOICE-ADMIT", 46: "EF"}
)
_NUMBERS = {name: number for number, name in DSCP_NAMES.items()} | {"BE": 0, "DF": 0, "VA": 44}


def marking_name(dscp: int) -> str:
    """Returns the name of a DSCP value (0 to 63), or its number where it has none."""
    return DSCP_NAMES.get(dscp, str(dscp))


def dscp_of(marking: object) -> int:
    """Returns the DSCP value of a marking.

    Args:
        marking: A name in any case, or the number.

    Raises:
        InputError: There is no such marking.
    """
    if isinstance(marking, str):
        named = _NUMBERS.get(marking.strip().upper())
        if named is not None:
            return named
    elif type(marking) is int and 0 <= marking <= HIGHEST_DSCP:
        return marking
    raise InputError(
        "marking",
        got=quoted(marking),
        wanted=f"a DSCP name such as EF, AF31, CS5 or VOICE-ADMIT, or 0 to {HIGHEST_DSCP}",
    )
