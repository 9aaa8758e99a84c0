"""The kernel's gate: a socket filter that lets headers in and keeps speech out.

It is a program of the classic packet filter, as the kernel's own documents describe it
(Documentation/networking/filter.rst). For each frame it returns how many octets the kernel may hand
over. RTP is handed over as far as its header, other UDP as far as its UDP header, and everything
else not at all. So no octet of speech enters the process.
"""

import ctypes
import socket
import struct
from dataclasses import dataclass, field

# Instructions: class, size and mode as in the kernel's document.
LOAD_TWO, LOAD_ONE = 0x28, 0x30  # A = two octets, one octet at K
LOAD_ONE_X, LOAD_TWO_X = 0x50, 0x48  # the same at X + K
LOAD_IHL = 0xB1  # X = 4 * (octet at K & 15)
SET_X, A_TO_X, X_TO_A = 0x01, 0x07, 0x87  # X = K; X = A; A = X
AND, SHIFT_LEFT, ADD, ADD_X = 0x54, 0x64, 0x04, 0x0C
EQUAL, ANY_BIT = 0x15, 0x45
JUMP, RETURN, RETURN_A = 0x05, 0x06, 0x16

ETHERNET, RTP_HEADER, UDP_HEADER, IPV6_HEADER = 14, 12, 8, 40
IPV4, IPV6, MPLS, PPPOE = 0x0800, 0x86DD, 0x8847, 0x8864
VLANS = (0x8100, 0x88A8, 0x9100)
UDP, FRAGMENT = 17, 44
EXTENSIONS = (0, 43, 60)  # hop-by-hop, routing, destination options
# With IPv6 extension headers the RTP header is not looked for: this is room for one of them.
EXTENDED = IPV6_HEADER + 8 + UDP_HEADER + RTP_HEADER
MOST_TAGS, MOST_LABELS = 2, 3
SO_ATTACH_FILTER = 26


@dataclass(slots=True)
class Program:
    """A filter being written; jumps name labels, which are resolved at the end."""

    code: list[tuple[int, str, str, int]] = field(default_factory=list)
    labels: dict[str, int] = field(default_factory=dict)

    def at(self, label: str) -> None:
        """Names the place of the next instruction."""
        self.labels[label] = len(self.code)

    def do(self, operation: int, value: int = 0) -> None:
        """Adds an instruction that does not jump."""
        self.code.append((operation, "", "", value))

    def when(self, test: int, value: int, label: str, otherwise: str = "") -> None:
        """Adds a jump forwards on a test of A; without a label it goes on."""
        self.code.append((test, label, otherwise, value))

    def go(self, label: str) -> None:
        """Adds a jump forwards."""
        self.code.append((JUMP, label, "", 0))

    def assembled(self) -> bytes:
        """Returns the program as the kernel takes it."""
        octets = b""
        for place, (operation, true, false, value) in enumerate(self.code):
            to_true = self.labels[true] - place - 1 if true else 0
            to_false = self.labels[false] - place - 1 if false else 0
            if operation == JUMP:
                octets += struct.pack("=HBBI", operation, 0, 0, to_true)
            else:
                octets += struct.pack("=HBBI", operation, to_true, to_false, value)
        return octets


def headers_only(*, ethernet: bool) -> bytes:
    """Returns the gate's program.

    Args:
        ethernet: Whether frames begin with an Ethernet header, or at once with the IP packet.
    """
    program = Program()
    if ethernet:
        _ethernet(program)
    else:
        _by_version(program, 0)
    program.at("drop")
    program.do(RETURN, 0)
    return program.assembled()


def _ethernet(program: Program) -> None:
    """Finds the network layer behind tags, labels and sessions."""
    for tags in range(MOST_TAGS + 1):
        at = ETHERNET + 4 * tags
        program.at(f"tags {tags}")
        program.do(LOAD_TWO, at - 2)
        following = f"tags {tags + 1}" if tags < MOST_TAGS else "drop"
        for kind, where in (
            (IPV4, f"v4 at {at}"),
            (IPV6, f"v6 at {at}"),
            (MPLS, f"labels at {at}"),
            (PPPOE, f"session at {at}"),
            *((vlan, following) for vlan in VLANS),
        ):
            # A test can only jump a short way; a jump goes as far as need be.
            program.when(EQUAL, kind, "", f"not {kind} at {at}")
            program.go(where)
            program.at(f"not {kind} at {at}")
        program.go("drop")
        _network(program, at)
        _labels(program, at)
        program.at(f"session at {at}")
        _by_version(program, at + 8)


def _labels(program: Program, at: int) -> None:
    """Steps over MPLS labels to the bottom of the stack (RFC 3032 2.1)."""
    program.at(f"labels at {at}")
    for label in range(MOST_LABELS):
        here = at + 4 * label
        program.do(LOAD_ONE, here + 2)
        program.when(ANY_BIT, 1, "", f"no bottom at {at}/{label}")
        program.go(f"bottom at {at}/{label}")
        program.at(f"no bottom at {at}/{label}")
    program.go("drop")
    for label in range(MOST_LABELS):
        program.at(f"bottom at {at}/{label}")
        _by_version(program, at + 4 * label + 4)


def _by_version(program: Program, at: int) -> None:
    """Goes by the first four bits of the IP packet."""
    own = f"{at} number {len(program.code)}"
    program.do(LOAD_ONE, at)
    program.do(AND, 0xF0)
    program.when(EQUAL, 0x40, f"v4 {own}")
    program.when(EQUAL, 0x60, "", f"neither {own}")
    _ipv6(program, at, own)
    program.at(f"neither {own}")
    program.do(RETURN, 0)
    program.at(f"v4 {own}")
    _ipv4(program, at, own)


def _network(program: Program, at: int) -> None:
    program.at(f"v4 at {at}")
    _ipv4(program, at, f"at {at}")
    program.at(f"v6 at {at}")
    _ipv6(program, at, f"at {at}")


def _ipv4(program: Program, at: int, own: str) -> None:
    program.do(LOAD_ONE, at + 9)
    program.when(EQUAL, UDP, "", f"no udp4 {own}")
    program.do(LOAD_IHL, at)
    program.do(LOAD_TWO, at + 6)
    program.when(ANY_BIT, 0x1FFF, f"fragment {own}")
    _udp(program, at, f"4 {own}")
    program.at(f"fragment {own}")  # a later one: its IP header is all there is to see
    program.do(X_TO_A)
    program.do(ADD, at)
    program.do(RETURN_A)
    program.at(f"no udp4 {own}")
    program.do(RETURN, 0)


def _ipv6(program: Program, at: int, own: str) -> None:
    program.do(LOAD_ONE, at + 6)
    program.when(EQUAL, UDP, f"udp6 {own}")
    program.when(EQUAL, FRAGMENT, f"fragment6 {own}")
    for extension in EXTENSIONS:
        program.when(EQUAL, extension, f"extended {own}")
    program.do(RETURN, 0)
    program.at(f"fragment6 {own}")
    program.do(LOAD_TWO, at + IPV6_HEADER + 2)
    program.when(ANY_BIT, 0xFFF8, "", f"extended {own}")
    program.do(RETURN, at + IPV6_HEADER + 8)  # a later one holds no header but its own
    program.at(f"extended {own}")
    program.do(RETURN, at + EXTENDED)
    program.at(f"udp6 {own}")
    program.do(SET_X, IPV6_HEADER)
    _udp(program, at, f"6 {own}")


def _udp(program: Program, at: int, own: str) -> None:
    """Returns the octets of the headers; X is the IP header's length."""
    rtp = at + UDP_HEADER
    program.do(LOAD_ONE_X, rtp)
    program.do(AND, 0xC0)
    program.when(EQUAL, 0x80, f"version 2 {own}")
    program.do(X_TO_A)
    program.do(ADD, rtp)
    program.do(RETURN_A)
    program.at(f"version 2 {own}")
    # The fixed header, the CSRC list, and where there is an extension its own header.
    program.do(LOAD_ONE_X, rtp)
    program.when(ANY_BIT, 0x10, f"extension {own}")
    for name, more in (("plain", 0), ("extension", 4)):
        program.at(f"{name} {own}")
        program.do(LOAD_ONE_X, rtp)
        program.do(AND, 0x0F)
        program.do(SHIFT_LEFT, 2)
        program.do(ADD_X)
        program.do(ADD, rtp + RTP_HEADER + more)
        program.do(RETURN_A)


def close_gate(tap: socket.socket, program: bytes) -> None:
    """Puts the program before a socket; from then on only what it passes comes in."""
    code = ctypes.create_string_buffer(program, len(program))
    filter_of = struct.pack("HL", len(program) // 8, ctypes.addressof(code))
    tap.setsockopt(socket.SOL_SOCKET, SO_ATTACH_FILTER, filter_of)
