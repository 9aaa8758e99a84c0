"""The commands that need no packets: what a call costs, and what a plan comes to."""

import json
from dataclasses import asdict
from textwrap import wrap
from typing import Any

from linkwatch.plan.codecs import find_codec
from linkwatch.plan.cost import call_cost
from linkwatch.plan.framing import parse_framing
from linkwatch.plan.layers.layer import IPV4, IPV6, RTP, UDP
from linkwatch.plan.model import Direction, LinkPlan, Plan
from linkwatch.plan.review import DIRECTIONS, doubts

WIDTH = 80
LABEL = 16  # columns of what stands left of a figure
FIGURE = 12

# What is told of each direction: key, label, unit, and what is said where there is none.
FIGURES = (
    ("capacity_kbps", "capacity", "kbit/s", "not given"),
    ("budget_kbps", "budget", "kbit/s", "no limit"),
    ("calls_that_fit", "fit into it", "calls", "no limit"),
    ("planned_calls", "planned", "calls", "no limit"),
    ("reserve_calls", "reserve", "calls", ""),
    ("room_calls", "left beside it", "calls", "no limit"),
)

CAUTIONS = (
    (
        "A limit must never refuse an emergency call: that is what the reserve is for. Design "
        "emergency access by local codes and licensed practice."
    ),
    "Figures are an aid and no guarantee: measure, and leave a margin.",
)


def print_cost(
    codec: str,
    packet_ms: float | None,
    framing: str,
    *,
    ipv6: bool = False,
    srtp_tag_octets: int = 0,
    as_json: bool = False,
) -> str:
    """Returns what one direction of one call costs, for people or as JSON.

    Args:
        codec: The codec's name.
        packet_ms: The packetisation, milliseconds; None is the codec's default.
        framing: The layers from the IP packet outwards, as on the command line.
        ipv6: Whether the call runs over IPv6.
        srtp_tag_octets: What SRTP adds to each packet.
        as_json: Whether a machine reads it.

    Raises:
        InputError: An unknown codec or layer, half a frame, or a stack that cannot be.
    """
    stack = parse_framing(framing)
    kind = find_codec(codec, packet_ms)
    cost = call_cost(kind, packet_ms, stack, ipv6=ipv6, srtp_tag_octets=srtp_tag_octets)
    if as_json:
        return json.dumps(asdict(cost))
    version, header = ("IPv6", IPV6) if ipv6 else ("IPv4", IPV4)
    frames = kind.frames(cost.packet_ms)
    tag = f", SRTP tag {srtp_tag_octets}" if srtp_tag_octets else ""
    of_frames = f"{frames} x {kind.frame_octets} octets, {kind.frame_ms:g} ms each"
    headers = f"{version} {header}, UDP {UDP}, RTP {RTP}{tag}"
    rows = [("payload", cost.payload_octets, of_frames), ("IP packet", cost.ip_octets, headers)]
    rows += stack.steps(cost.ip_octets, header)
    lines = [f"{cost.codec}, {cost.packet_ms:g} ms, {version}: one direction of one call", ""]
    for name, octets, account in rows:
        lines += _row(f"{name:13}{octets:7g} octets  ", account)
    rate = f"{cost.packets_per_second:.4g} packets/s"
    lines += ["", f"  on the link  {cost.link_octets:7g} octets  {rate}  {cost.kbps:.2f} kbit/s"]
    return "\n".join(lines)


def print_plan(plan: Plan, *, as_json: bool = False) -> str:
    """Returns what a plan comes to, link by link, for people or as JSON.

    Args:
        plan: The plan.
        as_json: Whether a machine reads it.
    """
    if as_json:
        links = [_link_json(link) for link in plan.links]
        return json.dumps({"site": plan.site, "links": links, "cautions": CAUTIONS})
    lines = [plan.site]
    for link in plan.links:
        lines += ["", *_link_lines(link)]
    lines.append("")
    for caution in CAUTIONS:
        lines += wrap(caution, WIDTH)
    return "\n".join(lines)


def _row(label: str, text: str) -> list[str]:
    """Returns a label and a text beside it, which goes on below where it is long."""
    first, *more = wrap(text, WIDTH - 2 - len(label)) or [""]
    return [f"  {label}{first}", *(" " * (2 + len(label)) + line for line in more)]


def _link_lines(link: LinkPlan) -> list[str]:
    cost, call = link.call_cost(), link.call
    lines = _row(f"{'framing':{LABEL}}", str(link.framing))
    if link.site_prefixes:
        lines += _row(f"{'site':{LABEL}}", ", ".join(str(n) for n in link.site_prefixes))
    marked = f", marked {call.marking}" if call.marking else ""
    lines += _row(
        f"{'planned call':{LABEL}}",
        f"{cost.codec} {cost.packet_ms:g} ms{marked}: {cost.ip_octets} octets of IP, "
        f"{cost.link_octets:g} on the link, {cost.packets_per_second:.4g} packets/s, "
        f"{cost.kbps:.2f} kbit/s each way",
    )
    both_versions = {network.version for network in link.site_prefixes} == {4, 6}
    if both_versions and not call.ipv6:
        dearer = link.call_cost(ipv6=True)
        lines += _row(f"{'':{LABEL}}", f"over IPv6 it costs {dearer.kbps:.2f} kbit/s each way")
    lines.append(f"  {'':{LABEL}}{'to site':>{FIGURE}}{'from site':>{FIGURE}}")
    columns = [_direction(link, way) for way in DIRECTIONS]
    for key, label, unit, without in FIGURES:
        lines.append(_figures(label, [column[key] for column in columns], unit, without))
    for doubt in doubts(link):
        lines += _row("! ", doubt)
    return [link.name, *lines]


def _figures(label: str, values: list[float | None], unit: str, without: str) -> str:
    shown = (without if value is None else _plain(value) for value in values)
    line = f"  {label:{LABEL}}" + "".join(f"{value:>{FIGURE}}" for value in shown)
    return line if None in values else f"{line}  {unit}"


def _plain(value: float) -> str:
    """Returns a figure to a tenth, without a tenth that is none."""
    return f"{value:.1f}".removesuffix(".0")


def _direction(link: LinkPlan, way: Direction) -> dict[str, Any]:
    budget = link.budget_for(way)
    return {
        "capacity_kbps": getattr(link.capacity, way) if link.capacity else None,
        "budget_kbps": budget.kbps,
        "calls_that_fit": None if budget.kbps is None else budget.calls_that_fit(budget.kbps),
        "planned_calls": budget.calls,
        "reserve_calls": budget.reserve_calls,
        "reserve_kbps": budget.reserve_kbps,
        "room_calls": budget.room(0, 0.0),
    }


def _link_json(link: LinkPlan) -> dict[str, Any]:
    return {
        "name": link.name,
        "framing": str(link.framing),
        "site_prefixes": [str(network) for network in link.site_prefixes],
        "call": asdict(link.call_cost()) | {"marking": link.call.marking},
        **{way: _direction(link, way) for way in DIRECTIONS},
        "doubts": doubts(link),
    }
