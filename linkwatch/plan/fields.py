"""How the values of a plan file are read: the types of its fields, and what is wanted there."""

from collections.abc import Callable, Mapping
from ipaddress import IPv4Address, IPv4Network, IPv6Address, IPv6Network, ip_network
from typing import Annotated, TypeGuard, TypeVar

from pydantic import BaseModel, BeforeValidator, Field
from pydantic_core import PydanticCustomError

from linkwatch.errors import InputError
from linkwatch.plan.codecs import Codec, find_codec
from linkwatch.plan.framing import Framing, LayerError, make_framing, parse_framing
from linkwatch.plan.marking import dscp_of
from linkwatch.plan.wording import quoted

Address = IPv4Address | IPv6Address
Network = IPv4Network | IPv6Network
Value = TypeVar("Value")

MOST_KBPS = 1e9
MOST_LINKS = 64
MOST_CALLS = 100_000
MOST_CRITERIA = 1000
PAYLOAD_TYPES = {*range(128)} - {*range(72, 77)}  # RFC 3551 table 5: these would look like RTCP
NOT_SPEECH = {"TELEPHONE-EVENT": "telephone-event", "CN": "CN"}


def fault(error: InputError, *path: str | int) -> PydanticCustomError:
    """Returns an error for pydantic to carry: ours, and the way from here to where it lies."""
    return PydanticCustomError("told", "told", {"error": error, "path": path})


def reads(read: Callable[[object], Value]) -> BeforeValidator:
    """Returns a validator that reads a field by a function of ours, and passes its error on."""

    def validate(given: object) -> object:
        try:
            return read(given)
        except InputError as error:
            raise fault(error) from None

    return BeforeValidator(validate)


def unfit(given: object, wanted: str, remedy: str = "") -> InputError:
    """Returns the error that what was given does not fit; where it stands is added later."""
    return InputError("", got=quoted(given), wanted=wanted, remedy=remedy)


def read_name(given: object) -> str:
    """Returns a name, without the space around it."""
    wanted = "a name of 1 to 60 printable signs"
    if not isinstance(given, str):
        raise unfit(given, wanted, "Put it in quotes.")
    name = given.strip()
    if not 1 <= len(name) <= 60 or not name.isprintable():
        raise unfit(given, wanted)
    return name


def is_number(given: object) -> TypeGuard[int | float]:
    """Whether it is a number; to Python yes and no are numbers too."""
    return type(given) in (int, float)


def listed(least: int, most: int, wanted: str, given: object) -> object:
    """Returns a list, once its length is right."""
    # Pydantic would count the faulty entries out, and complain of the rest's length as well.
    if not isinstance(given, tuple | list) or not least <= len(given) <= most:
        raise unfit(given, wanted)
    return given


def read_capacity(given: object) -> object:
    """Returns a capacity for both directions, from one number or two."""
    if isinstance(given, dict | BaseModel):
        return given
    if not is_number(given) or not 0 < given <= MOST_KBPS:
        raise unfit(given, f"{KBPS_WANTED}, or {{to_site: ..., from_site: ...}}")
    return {"to_site": given, "from_site": given}


def read_framing(given: object) -> Framing:
    """Returns a framing, from a list of layers or the words of the command line."""
    if isinstance(given, str):
        return parse_framing(given)
    if isinstance(given, Framing):
        return given
    if not isinstance(given, tuple | list):
        raise unfit(given, "a list of layers, such as [crtp, ppp]")
    try:
        return make_framing(given)
    except LayerError as error:
        raise fault(error, min(error.index, len(given) - 1)) from None


def read_prefixes(given: object) -> tuple[Network, ...]:
    """Returns the networks of a site."""
    if not isinstance(given, tuple | list):
        raise unfit(given, "a list of networks, such as [10.20.0.0/16, 2001:db8:20::/48]")
    return tuple(_prefix(index, text) for index, text in enumerate(given))


def _prefix(index: int, given: object) -> Network:
    wanted = "a network, such as 10.20.0.0/16 or 2001:db8:20::/48"
    if not isinstance(given, str):
        raise fault(unfit(given, wanted), index)
    try:
        return ip_network(given)
    except ValueError:
        pass
    try:
        remedy = f"Did you mean {ip_network(given, strict=False)}?"
    except ValueError:
        remedy = ""
    raise fault(unfit(given, wanted, remedy), index)


def read_codec(given: object) -> Codec:
    """Returns the codec of a name."""
    if isinstance(given, Codec):
        return given
    if not isinstance(given, str):
        raise unfit(given, "a codec's name, such as G729")
    return find_codec(given)


def read_payload_types(given: object) -> Mapping[int, str]:
    """Returns what payload types mean, by number."""
    if not isinstance(given, Mapping):
        raise unfit(given, "payload types with what they mean, such as {97: ILBC}")
    return {_payload_type(number): _meaning(number, name) for number, name in given.items()}


def _payload_type(number: object) -> int:
    text = str(number)
    if text.isdecimal() and len(text) <= 3 and int(text) in PAYLOAD_TYPES:
        return int(text)
    wanted = "a payload type from 0 to 127, and not 72 to 76, which are RTCP's"
    raise fault(unfit(number, wanted), str(number))


def _meaning(number: object, name: object) -> str:
    if isinstance(name, str) and name.upper() in NOT_SPEECH:
        return NOT_SPEECH[name.upper()]
    try:
        read_codec(name)
    except InputError as error:
        raise fault(error, str(number)) from None
    return str(name).strip()


Name = Annotated[str, reads(read_name)]
Kbps = Annotated[float, Field(gt=0, le=MOST_KBPS, allow_inf_nan=False)]
Calls = Annotated[int, Field(ge=1, le=MOST_CALLS)]
Percent = Annotated[float, Field(gt=0, le=100, allow_inf_nan=False)]
Milliseconds = Annotated[float, Field(gt=0, le=10_000, allow_inf_nan=False)]
Seconds = Annotated[float, Field(ge=0, le=86_400, allow_inf_nan=False)]
Mos = Annotated[float, Field(ge=1, le=5, allow_inf_nan=False)]
Marking = Annotated[int, reads(dscp_of)]

KBPS_WANTED = "kbit/s of 1000 bit/s, above 0 and at most 1,000,000,000"
SECONDS_WANTED = "seconds, 0 to 86400"
MOS_WANTED = "a mean opinion score, 1 to 5"
CALLS_WANTED = "a whole number of calls, 1 to 100,000"
LINKS_WANTED = f"a list of 1 to {MOST_LINKS} links"
CRITERIA_WANTED = f"a list of up to {MOST_CRITERIA} criteria, each with name and want"
YES_OR_NO = "yes or no"
MARKING_WANTED = "a DSCP name such as EF, or 0 to 63"
