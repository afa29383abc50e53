"""Reading and writing one descriptor on the loop: what arrives, what does not fit, and the other side's end."""

import asyncio
import os
import socket
from collections.abc import Awaitable, Callable

from hvhost.ports.descriptor import DescriptorPort

Body = Callable[[DescriptorPort, socket.socket, "Heard"], Awaitable[None]]


class Heard:
    """What the port called back."""

    def __init__(self) -> None:
        self.data, self.rooms, self.gone = b"", 0, []
        self.closed = 0

    def bytes(self, data: bytes) -> None:
        """Bytes came."""
        self.data += data

    def room(self) -> None:
        """There is room again."""
        self.rooms += 1

    def lost(self, reason: str) -> None:
        """The other side is gone."""
        self.gone.append(reason)

    def close(self) -> None:
        """The port let go of its descriptor."""
        self.closed += 1


async def until(condition: Callable[[], bool]) -> None:
    """Let the loop turn until the condition holds; bounded."""
    async with asyncio.timeout(20.0):
        while not condition():
            await asyncio.sleep(0)


def with_port(body: Body) -> Heard:
    """Run a body with a port on one end of a pair of sockets."""
    heard = Heard()

    async def run() -> None:
        near, far = socket.socketpair()
        port = DescriptorPort(near.fileno(), "pair", heard.close)
        port.attach(heard.bytes, heard.room, heard.lost)
        try:
            await body(port, far, heard)
        finally:
            port.close()
            near.close()
            far.close()

    asyncio.run(run())
    return heard


def test_what_arrives_is_handed_on() -> None:
    """Bytes are handed on in order, whatever the pieces."""
    async def body(port: DescriptorPort, far: socket.socket, heard: Heard) -> None:
        far.sendall(b"abc")
        far.sendall(b"def")
        await until(lambda: heard.data == b"abcdef")

    assert with_port(body).gone == []


def test_writing_takes_what_fits_and_hands_back_the_rest() -> None:
    """A peer that does not drain gets what its buffer holds; the rest comes back, and room is told when it drains."""
    async def body(port: DescriptorPort, far: socket.socket, heard: Heard) -> None:
        data = bytes(8 << 20)
        rest = port.write_nowait(data)
        assert 0 < len(rest) < len(data)
        assert port.write_nowait(b"x") == b"x"
        far.setblocking(False)
        got = 0
        while got < len(data) - len(rest):
            got += len(far.recv(1 << 20))
        await until(lambda: heard.rooms > 0)
        assert port.write_nowait(b"x") == b""

    with_port(body)


def test_the_other_side_s_end_is_told_once() -> None:
    """An end of the stream is told with a reason, once; the descriptor is let go, and writing is then nothing."""
    async def body(port: DescriptorPort, far: socket.socket, heard: Heard) -> None:
        far.close()
        await until(lambda: bool(heard.gone))
        assert port.write_nowait(b"late") == b""
        port.close()

    heard = with_port(body)
    assert heard.gone == ["closed by the other side"]
    assert heard.closed == 1


def test_a_reset_while_writing_is_told() -> None:
    """A write that the system refuses is the end of the port, not an exception."""
    async def body(port: DescriptorPort, far: socket.socket, heard: Heard) -> None:
        far.close()
        port.write_nowait(b"one")
        port.write_nowait(b"two")
        await until(lambda: bool(heard.gone))

    assert with_port(body).closed == 1


def test_a_terminal_that_hangs_up_is_told() -> None:
    """A pseudo-terminal whose other end closes gives an error on reading: told as the end."""
    heard = Heard()

    async def run() -> None:
        master, slave = os.openpty()
        port = DescriptorPort(slave, "tty", lambda: os.close(slave))
        port.attach(heard.bytes, heard.room, heard.lost)
        os.close(master)
        await until(lambda: bool(heard.gone))

    asyncio.run(run())
    assert len(heard.gone) == 1


def test_writing_before_attaching_sends_nothing() -> None:
    """A port that no loop reads yet takes no bytes."""
    near, far = socket.socketpair()
    with near, far:
        assert DescriptorPort(near.fileno(), "pair", near.close).write_nowait(b"x") == b""
