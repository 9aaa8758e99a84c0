"""The ports of this machine, and what is said where one cannot be opened."""

import errno
import os
import socket

import pytest

from linkwatch.errors import PermissionMissing, TapError
from linkwatch.tap.ports import list_ports, open_port, remedy

PORTS = [name for _, name in socket.if_nameindex()]


class QuietTap:
    """A tap that only keeps what is remarked on it."""

    def __init__(self):
        self.remarks = []

    def remark(self, text):
        self.remarks.append(text)


def opening(error):
    """Returns an opener that fails with an error."""

    def opened(name):
        raise error

    return opened


def test_every_port_of_the_system_is_listed_once_those_that_are_up_first():
    """The list has each port that the system names, ordered by state and name."""
    ports = list_ports()
    assert sorted(port.name for port in ports) == sorted(PORTS)
    assert [(not port.up, port.name) for port in ports] == sorted(
        (not port.up, port.name) for port in ports
    )
    assert all(port.speed_kbps >= 0 for port in ports)


def test_the_loopback_port_has_its_published_address():
    """Addresses are IP addresses: loopback has 127.0.0.1 (RFC 1122 3.2.1.3) and no scope."""
    addresses = {address for port in list_ports() for address in port.addresses}
    assert "127.0.0.1" in addresses
    assert not any("%" in address for address in addresses)


@pytest.mark.parametrize("allowed", [True, False])
def test_a_remedy_is_told_exactly_where_packets_may_not_be_read(monkeypatch, allowed):
    """Whoever may not read packets is told what to do, and nobody else."""
    monkeypatch.setattr("linkwatch.tap.ports._may_read", lambda: allowed)
    for port in list_ports():
        assert port.readable is allowed
        assert port.remedy == ("" if allowed else remedy())


def test_an_unknown_port_is_an_error_that_lists_the_ports_there_are():
    """A wrong name is answered with the right ones, in one line."""
    with pytest.raises(TapError) as told:
        open_port("no-such-port")
    assert told.value.exit_status == 2
    assert "no-such-port" in str(told.value)
    assert all(name in str(told.value) for name in PORTS)
    assert "\n" not in str(told.value)


def test_a_missing_right_is_told_with_its_remedy_and_its_own_exit_status(monkeypatch):
    """Where packets may not be read, the error says how to get the right, with status 3."""
    monkeypatch.setattr("linkwatch.tap.ports._opened", opening(PermissionError(1, "no")))
    with pytest.raises(PermissionMissing) as told:
        open_port(PORTS[0])
    assert told.value.exit_status == 3
    assert told.value.remedy == remedy()
    assert PORTS[0] in str(told.value)
    assert "sudo" in str(told.value)


def test_what_else_the_system_refuses_is_told_in_its_own_words(monkeypatch):
    """An error of the operating system names the port and the cause, with status 2."""
    refusal = OSError(errno.ENETDOWN, os.strerror(errno.ENETDOWN))
    monkeypatch.setattr("linkwatch.tap.ports._opened", opening(refusal))
    with pytest.raises(TapError) as told:
        open_port(PORTS[0])
    assert told.value.exit_status == 2
    assert os.strerror(errno.ENETDOWN).lower() in str(told.value)


@pytest.mark.parametrize("kept", ["", "root is kept"])
def test_root_is_given_up_only_once_the_port_is_open(monkeypatch, kept):
    """Opening comes first, then root goes; where it has to stay, the tap says so."""
    order, tap = [], QuietTap()
    monkeypatch.setattr("linkwatch.tap.ports._opened", lambda _: order.append("open") or tap)
    monkeypatch.setattr("linkwatch.tap.ports.give_up_root", lambda: order.append("give up") or kept)
    assert open_port(PORTS[0]) is tap
    assert order == ["open", "give up"]
    assert tap.remarks == ([kept] if kept else [])
