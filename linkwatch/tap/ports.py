"""The ports of this machine: which there are, which may be read, and opening one."""

import socket
import sys
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from linkwatch.errors import PermissionMissing, TapError
from linkwatch.frames import Tap
from linkwatch.tap.rights import give_up_root

if TYPE_CHECKING:
    from linkwatch.tap.portable import ListeningSocket
    from linkwatch.tap.ring import PacketRing


@dataclass(frozen=True, slots=True)
class Port:
    """A port of this machine.

    Attributes:
        name: Its name.
        up: Whether it is up.
        speed_kbps: Its speed, 0 where the system does not say.
        mtu: Octets of the longest packet.
        addresses: Its IP addresses.
        readable: Whether packets may be read on it.
        remedy: What to do where not, else "".
    """

    name: str
    up: bool
    speed_kbps: int
    mtu: int
    addresses: tuple[str, ...]
    readable: bool
    remedy: str


def remedy() -> str:
    """Returns how to get the right to read packets on this system."""
    if not sys.platform.startswith("linux"):
        return "Start it with sudo, or as an administrator."
    interpreter = Path(sys.executable)
    return (
        "Start it with sudo (root is given up once the port is open), or give the right to an "
        "interpreter of its own (of an environment made with `python3 -m venv --copies`): "
        f"sudo setcap cap_net_raw+ep {interpreter}"
    )


def open_port(name: str) -> Tap:
    """Opens a port, and gives up root.

    Raises:
        PermissionMissing: Packets may not be read.
        TapError: There is no such port, or its frames cannot be read.
    """
    names = [port for _, port in socket.if_nameindex()]
    if name not in names:
        raise TapError(name, got="no such port", wanted=f"one of {', '.join(names)}")
    try:
        tap = _opened(name)
    except PermissionError:
        raise PermissionMissing(name, got="packets may not be read here", remedy=remedy()) from None
    except OSError as error:
        raise TapError(name, got=(error.strerror or str(error)).lower()) from None
    remark = give_up_root()
    if remark:
        tap.remark(remark)
    return tap


def _opened(name: str) -> "PacketRing | ListeningSocket":
    if sys.platform.startswith("linux"):
        from linkwatch.tap.ring import PacketRing

        return PacketRing(name)
    from linkwatch.tap.portable import ListeningSocket

    return ListeningSocket(name)


def list_ports() -> tuple[Port, ...]:
    """Returns the ports of this machine, those that are up first."""
    import psutil

    states, addresses = psutil.net_if_stats(), psutil.net_if_addrs()
    families = {socket.AF_INET, socket.AF_INET6}
    allowed = _may_read()
    ports = [
        Port(
            name=name,
            up=state.isup,
            speed_kbps=max(0, state.speed) * 1000,
            mtu=state.mtu,
            addresses=tuple(
                address.address.split("%")[0]
                for address in addresses.get(name, ())
                if address.family in families
            ),
            readable=allowed,
            remedy="" if allowed else remedy(),
        )
        for name, state in states.items()
    ]
    return tuple(sorted(ports, key=lambda port: (not port.up, port.name)))


def _may_read() -> bool:
    """Whether this process may open a packet socket."""
    if not hasattr(socket, "AF_PACKET"):
        import os

        return os.access("/dev/bpf0", os.R_OK)
    try:
        socket.socket(socket.AF_PACKET, socket.SOCK_RAW, 0).close()
    except OSError:
        return False
    return True
