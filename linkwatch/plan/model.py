"""What was promised for a site, as a plan file says it.

Every field's description is what an error says is wanted there, and what docs/plan-file.md says.
"""

from collections.abc import Mapping
from functools import partial
from types import MappingProxyType
from typing import Annotated, ClassVar, Literal, Self

from pydantic import AfterValidator, BaseModel, ConfigDict, Field, model_validator
from pydantic.fields import FieldInfo

from linkwatch.errors import InputError
from linkwatch.plan.budget import Budget
from linkwatch.plan.codecs import Codec, find_codec
from linkwatch.plan.cost import LONGEST_TAG, CallCost, call_cost
from linkwatch.plan.fields import (
    CALLS_WANTED,
    CRITERIA_WANTED,
    KBPS_WANTED,
    LINKS_WANTED,
    MARKING_WANTED,
    MOS_WANTED,
    MOST_CALLS,
    MOST_CRITERIA,
    MOST_LINKS,
    SECONDS_WANTED,
    YES_OR_NO,
    Address,
    Calls,
    Kbps,
    Marking,
    Milliseconds,
    Mos,
    Name,
    Network,
    Percent,
    Seconds,
    fault,
    is_number,
    listed,
    read_capacity,
    read_codec,
    read_framing,
    read_payload_types,
    read_prefixes,
    reads,
    unfit,
)
from linkwatch.plan.framing import Framing, parse_framing
from linkwatch.plan.marking import marking_name

Direction = Literal["to_site", "from_site"]


class Part(BaseModel):
    """A part of a plan: it never changes, and has no keys but its own."""

    model_config = ConfigDict(
        frozen=True, strict=True, extra="forbid", arbitrary_types_allowed=True
    )

    @classmethod
    def keys(cls) -> list[str]:
        """Returns the keys that a plan file may give here."""
        return [field.alias or name for name, field in cls.model_fields.items()]

    @classmethod
    def field(cls, key: str) -> FieldInfo | None:
        """Returns the field that a key of the plan file fills."""
        return dict(zip(cls.keys(), cls.model_fields.values(), strict=True)).get(key)


class Capacity(Part):
    """What a link carries, kbit/s."""

    to_site: Kbps = Field(description=KBPS_WANTED)
    from_site: Kbps = Field(description=KBPS_WANTED)


class BudgetPlan(Part):
    """What voice may use of a link, in each direction."""

    calls: Calls | None = Field(default=None, description=CALLS_WANTED)
    kbps: Kbps | None = Field(default=None, description=KBPS_WANTED)
    share_percent: Percent | None = Field(
        default=None, description="percent of the capacity, above 0 and at most 100"
    )
    reserve_calls: int = Field(
        default=0, ge=0, le=MOST_CALLS, description="a whole number of calls, 0 up"
    )

    @model_validator(mode="after")
    def _agrees(self) -> Self:
        if self.kbps is not None and self.share_percent is not None:
            error = unfit(self.share_percent, "either kbps or share_percent, not both")
            raise fault(error, "share_percent")
        if self.calls is not None and self.reserve_calls > self.calls:
            wanted = f"no more than the {self.calls} calls of the budget"
            raise fault(unfit(self.reserve_calls, wanted), "reserve_calls")
        return self


class CallPlan(Part):
    """The planned call."""

    codec: Codec = Field(description="a codec's name, such as G729")
    packet_ms: float = Field(
        description="milliseconds of speech in a packet, a whole multiple of the codec's frame"
    )
    dscp: Marking | None = Field(default=None, alias="marking", description=MARKING_WANTED)
    silence_suppression: bool = Field(default=False, description=YES_OR_NO)
    srtp_tag_octets: int = Field(
        default=0, ge=0, le=LONGEST_TAG, description=f"octets from 0 to {LONGEST_TAG}; 10 is usual"
    )
    ipv6: bool = Field(default=False, description=YES_OR_NO)

    @model_validator(mode="before")
    @classmethod
    def _complete(cls, given: object) -> object:
        """Returns the call with its codec found, and the packetisation that goes with it."""
        if not isinstance(given, dict):
            return given
        name, packet_ms = given.get("codec", "PCMU"), given.get("packet_ms")
        known_ms = packet_ms if is_number(packet_ms) else None
        try:
            codec = find_codec(name, known_ms) if isinstance(name, str) else read_codec(name)
        except InputError as error:
            raise fault(error, "codec") from None
        if known_ms is not None:
            try:
                codec.frames(known_ms)
            except InputError as error:
                raise fault(error, "packet_ms") from None
        default = codec.default_packet_ms if packet_ms is None else packet_ms
        return given | {"codec": codec, "packet_ms": default}

    @property
    def marking(self) -> str | None:
        """The marking's name, or None where it is not judged."""
        return None if self.dscp is None else marking_name(self.dscp)


class LinkPlan(Part):
    """A constrained link of the site."""

    name: Name = Field(default="link", description="a name")
    capacity: Annotated[Capacity, reads(read_capacity)] | None = Field(
        default=None, alias="capacity_kbps", description=KBPS_WANTED
    )
    framing: Annotated[Framing, reads(read_framing)] = Field(
        default_factory=partial(parse_framing, "ethernet"), description="a list of layers"
    )
    site_prefixes: Annotated[tuple[Network, ...], reads(read_prefixes)] = Field(
        default=(), description="a list of networks"
    )
    budget: BudgetPlan = Field(
        default_factory=BudgetPlan, description="limits, such as {calls: 24, reserve_calls: 2}"
    )
    call: CallPlan = Field(
        default_factory=partial(CallPlan.model_validate, {}),
        description="a call, such as {codec: G729, packet_ms: 20}",
    )

    @model_validator(mode="after")
    def _agrees(self) -> Self:
        if self.budget.share_percent is not None and self.capacity is None:
            error = unfit(self.budget.share_percent, "a link whose capacity_kbps is given too")
            raise fault(error, "budget", "share_percent")
        return self

    def call_cost(self, ipv6: bool | None = None) -> CallCost:
        """Returns what the planned call costs here, one direction.

        Args:
            ipv6: Whether it runs over IPv6; None is as planned.
        """
        return call_cost(
            self.call.codec,
            self.call.packet_ms,
            self.framing,
            ipv6=self.call.ipv6 if ipv6 is None else ipv6,
            srtp_tag_octets=self.call.srtp_tag_octets,
        )

    def budget_for(self, direction: Direction) -> Budget:
        """Returns the admission budget of one direction."""
        kbps = self.budget.kbps
        if self.budget.share_percent is not None and self.capacity is not None:
            kbps = getattr(self.capacity, direction) * self.budget.share_percent / 100
        return Budget(
            calls=self.budget.calls,
            kbps=kbps,
            reserve_calls=self.budget.reserve_calls,
            call_kbps=self.call_cost().kbps,
        )

    def crossing(self, source: Address, destination: Address) -> Direction | None:
        """Returns which way packets between two addresses cross the link, or None.

        They cross it where one end is inside a site prefix and the other outside them all.
        """
        from_inside, to_inside = self._holds(source), self._holds(destination)
        if from_inside == to_inside:
            return None
        return "from_site" if from_inside else "to_site"

    def _holds(self, address: Address) -> bool:
        return any(address in network for network in self.site_prefixes)


class AlarmLimits(Part):
    """From where on it is an alarm."""

    loss_percent: float = Field(
        default=1.0, ge=0, le=100, allow_inf_nan=False, description="percent, 0 to 100"
    )
    jitter_ms: Milliseconds = Field(
        default=30.0, description="milliseconds, above 0 and at most 10000"
    )
    mos: Mos = Field(default=3.6, description=MOS_WANTED)
    hold_seconds: Seconds = Field(default=5.0, description=SECONDS_WANTED)


class Want(Part):
    """What a criterion asks of a call, or of the link."""

    codec: Annotated[Codec, reads(read_codec)] | None = Field(
        default=None, description="a codec's name, such as G729"
    )
    both_ways: bool | None = Field(default=None, description=YES_OR_NO)
    dscp: Marking | None = Field(default=None, alias="marking", description=MARKING_WANTED)
    seconds: Seconds | None = Field(default=None, description=SECONDS_WANTED)
    mos: Mos | None = Field(default=None, description=MOS_WANTED)
    concurrent_calls: Calls | None = Field(default=None, description=CALLS_WANTED)
    within_budget: bool | None = Field(default=None, description=YES_OR_NO)

    @model_validator(mode="after")
    def _asks(self) -> Self:
        if not self.model_fields_set:
            raise fault(InputError("", got="nothing asked", wanted=", ".join(self.keys())))
        return self


class Criterion(Part):
    """A sign-off criterion."""

    name: Name = Field(description="a name")
    want: Want = Field(description="what is asked, such as {codec: G729, both_ways: true}")
    count: int = Field(
        default=1, ge=1, le=1000, description="how many calls must meet it, 1 to 1000"
    )


class Plan(Part):
    """What was promised for a site.

    Attributes:
        given: Whether somebody gave it; False where nothing was promised, so nothing is judged.
    """

    given: ClassVar[bool] = True

    site: Name = Field(default="unnamed site", description="the site's name")
    links: Annotated[tuple[LinkPlan, ...], reads(partial(listed, 1, MOST_LINKS, LINKS_WANTED))] = (
        Field(description=LINKS_WANTED)
    )
    payload_types: Annotated[
        Mapping[int, str], AfterValidator(MappingProxyType), reads(read_payload_types)
    ] = Field(
        default_factory=partial(MappingProxyType, {}),
        description="payload types with what they mean, such as {97: ILBC}",
    )
    alarms: AlarmLimits = Field(
        default_factory=AlarmLimits, description="limits, such as {loss_percent: 1.0}"
    )
    acceptance: Annotated[
        tuple[Criterion, ...], reads(partial(listed, 0, MOST_CRITERIA, CRITERIA_WANTED))
    ] = Field(default=(), description=CRITERIA_WANTED)

    @model_validator(mode="after")
    def _names_differ(self) -> Self:
        names = [link.name for link in self.links]
        for index, name in enumerate(names):
            if name in names[:index]:
                error = unfit(name, "a name that no other link has")
                raise fault(error, "links", index, "name")
        return self


class NoPlan(Plan):
    """The plan where none is given."""

    given: ClassVar[bool] = False
