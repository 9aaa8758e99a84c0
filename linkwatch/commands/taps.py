"""What `linkwatch taps` prints."""

import json
from collections.abc import Sequence
from dataclasses import asdict

from linkwatch.tap.ports import Port


def print_taps(ports: Sequence[Port], *, as_json: bool) -> str:
    """Returns the ports there are, and which of them may be read."""
    if as_json:
        return json.dumps([asdict(port) for port in ports])
    lines = [f"{'port':15s} {'state':5s} {'Mbit/s':>7s} {'MTU':>6s}  addresses"]
    for port in ports:
        speed = f"{port.speed_kbps / 1000:.0f}" if port.speed_kbps else "?"
        state = "up" if port.up else "down"
        addresses = ", ".join(port.addresses)
        lines.append(f"{port.name:15s} {state:5s} {speed:>7s} {port.mtu:6d}  {addresses}".rstrip())
    lines.append("")
    remedies = dict.fromkeys(port.remedy for port in ports if port.remedy)
    lines += [f"Packets may not be read. {remedy}" for remedy in remedies]
    if not remedies:
        lines.append("Packets may be read on all of them.")
    return "\n".join(lines)
