"""A line has a UART's manners: it never waits, keeps little, and counts what it drops."""

import asyncio
import os
import termios

import pytest

from hvhost.standin.uart import KEEP, PtyLine, TcpLine, parse_address
from hvhost.words.errors import CannotConnect, UsageFault


def test_without_a_host_everything_is_dropped_and_counted() -> None:
    """Bytes into nothing are not kept for who comes later."""
    async def talk() -> None:
        line = PtyLine()
        line.look()
        assert not line.connected
        line.send(b"x" * 1000)
        assert line.dropped == 1000
        fd = os.open(line.name, os.O_RDWR | os.O_NOCTTY | os.O_NONBLOCK)
        line.look()
        assert line.connected
        with pytest.raises(BlockingIOError):
            os.read(fd, 10)
        os.close(fd)
        line.close()

    asyncio.run(talk())


def test_host_that_does_not_read_loses_bytes_but_never_blocks() -> None:
    """Beyond what the system holds only a small buffer is kept; the rest is counted as dropped."""
    async def talk() -> None:
        line = PtyLine()
        fd = os.open(line.name, os.O_RDWR | os.O_NOCTTY | os.O_NONBLOCK)
        line.look()
        sent = 0
        while line.dropped == 0 and sent < 1_000_000:
            line.send(b"0123456789abcdef" * 64)
            sent += 1024
        assert line.dropped
        for _ in range(100):
            line.send(b"y" * 1024)
        held = sent + 100 * 1024 - line.dropped
        assert held < 64_000
        got = 0
        for _ in range(1000):
            try:
                got += len(os.read(fd, 65536))
            except BlockingIOError:
                break
        assert held - KEEP <= got <= held
        os.close(fd)
        line.close()

    asyncio.run(talk())


def test_device_is_raw() -> None:
    """No line editing, no echo, no translation, whoever opens it."""
    async def talk() -> None:
        line = PtyLine()
        fd = os.open(line.name, os.O_RDWR | os.O_NOCTTY)
        mode = termios.tcgetattr(fd)
        assert not mode[3] & (termios.ICANON | termios.ECHO | termios.ISIG)
        assert not mode[1] & termios.OPOST
        assert not mode[0] & (termios.ICRNL | termios.IXON)
        os.close(fd)
        line.close()

    asyncio.run(talk())


@pytest.mark.parametrize(("text", "address"), [("127.0.0.1:0", ("127.0.0.1", 0)), ("[::1]:5025", ("::1", 5025))])
def test_address_is_read(text: str, address: tuple[str, int]) -> None:
    """Host and port, IPv6 in brackets."""
    assert parse_address(text) == address


@pytest.mark.parametrize("text", ["", "5025", ":5025", "host:", "host:99999", "host:-1", "host:5 025"])
def test_wrong_address_is_refused(text: str) -> None:
    """Anything else is a wrong command line."""
    with pytest.raises(UsageFault):
        parse_address(text)


def test_port_in_use_says_so() -> None:
    """A port that somebody has, and an address that is not ours, are refused with a remedy."""
    first = TcpLine("127.0.0.1", 0)
    with pytest.raises(CannotConnect, match="choose another port"):
        TcpLine("127.0.0.1", int(first.name.rpartition(":")[2]))
    first.close()
    with pytest.raises(CannotConnect, match="address of this machine"):
        TcpLine("192.0.2.1", 0)
