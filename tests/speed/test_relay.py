"""The relay: bytes pass both ways, stops are told with their side and time, nobody who does not read holds it."""

import os
import pty
import time
import tty

import pytest

from hvhost.speed.relay import Relay


@pytest.fixture
def board() -> "list[int]":
    """A board's terminal: its own end, and the one that is named."""
    master, slave = pty.openpty()
    tty.setraw(master)
    tty.setraw(slave)
    return [master, slave]


def opened(name: str) -> int:
    """Open a terminal as a port is opened."""
    fd = os.open(name, os.O_RDWR | os.O_NOCTTY)
    tty.setraw(fd)
    return fd


def test_bytes_pass_and_stops_are_told(board: list[int]) -> None:
    """A stop of each side with a time between asking and hearing; anything else passes in silence."""
    with Relay(os.ttyname(board[1])) as relay:
        host, bare = opened(relay.device), opened(relay.bare)
        begun_ns = time.monotonic_ns()
        os.write(host, b"\ncut 1 2\n")
        at_ns = relay.passed("daemon", 10.0)
        assert at_ns is not None
        assert begun_ns < at_ns < time.monotonic_ns()
        assert os.read(board[0], 100) == b"\ncut 1 2\n"
        os.write(bare, b"\nlower 1\n")
        assert relay.passed("bare", 10.0) is not None
        os.write(host, b"renew 1\n")
        assert os.read(board[0], 100) == b"renew 1\n"
        os.write(board[0], b"ok 1\n")
        assert os.read(host, 100) == b"ok 1\n"
        assert relay.passed("daemon", 0.0) is None
        relay.drain(0.0)
        os.close(host)
        os.close(bare)
    for fd in board:
        os.close(fd)
