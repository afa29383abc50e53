"""Where a stand-in's serial line ends: a pseudo-terminal or a TCP port, with the manners of a UART.

A UART does not wait: bytes that nobody takes are lost.  A line keeps at most ``KEEP`` bytes beyond what the system
takes and counts what it drops; with nobody at the other end everything is dropped.
"""

import asyncio
import contextlib
import errno
import os
import select
import socket
import tty
from collections.abc import Callable

from hvhost.words.errors import CannotConnect, UsageFault

KEEP = 4096
READ_MAX = 4096
SEND_BUFFER = 4096  # asked of the system for TCP, so that it does not hide a host that stopped reading


class Line:
    """One end: ``send`` never waits, ``on_bytes`` is called with what arrives; `look` notices who comes and goes."""

    name = ""

    def __init__(self) -> None:
        self.on_bytes: Callable[[bytes], None] = lambda data: None
        self.dropped = 0
        self._pending = bytearray()
        self._fd = -1  # of the peer, -1 while nobody is there

    @property
    def connected(self) -> bool:
        """Whether somebody has the other end open."""
        return self._fd >= 0

    def send(self, data: bytes) -> None:
        """Give these bytes to the line; what does not fit is dropped and counted."""
        if self._fd < 0:
            self.dropped += len(data)
            return
        self._pending += data
        try:
            del self._pending[: os.write(self._fd, self._pending)]
        except BlockingIOError:
            pass
        except OSError:
            self._lost()
            return
        if len(self._pending) > KEEP:
            self.dropped += len(self._pending) - KEEP
            del self._pending[KEEP:]

    def look(self) -> None:
        """Notice a host that came; called every few milliseconds."""

    def close(self) -> None:
        """Give the line back to the system."""
        self._lost()

    def _found(self, fd: int) -> None:
        self._fd = fd
        self._pending.clear()
        asyncio.get_running_loop().add_reader(fd, self._readable)

    def _lost(self) -> None:
        if self._fd >= 0:
            with contextlib.suppress(RuntimeError):
                asyncio.get_running_loop().remove_reader(self._fd)
            self._fd = -1
            self.dropped += len(self._pending)
            self._pending.clear()

    def _readable(self) -> None:
        try:
            data = os.read(self._fd, READ_MAX)
        except BlockingIOError:
            return
        except OSError:
            data = b""
        if data:
            self.on_bytes(data)
        else:
            self._lost()


class PtyLine(Line):
    """A pseudo-terminal in raw mode; ``name`` is the device that the host opens."""

    def __init__(self) -> None:
        super().__init__()
        self._master, slave = os.openpty()
        tty.setraw(slave)
        self.name = os.ttyname(slave)
        # closed here so that a host's coming and going shows as the end of a hang-up; the mode stays with the device
        os.close(slave)
        os.set_blocking(self._master, False)
        self._poll = select.poll()
        self._poll.register(self._master, select.POLLIN)

    def look(self) -> None:
        """A host is there while the device does not hang up, or has left bytes."""
        if self._fd < 0:
            found = self._poll.poll(0)
            if not found or found[0][1] & select.POLLIN:
                self._found(self._master)

    def close(self) -> None:
        """Close the device; the host's end hangs up."""
        super().close()
        os.close(self._master)


class TcpLine(Line):
    """A TCP port, one host at a time as on a serial device server; a second one is turned away."""

    def __init__(self, host: str, port: int) -> None:
        super().__init__()
        family = socket.AF_INET6 if ":" in host else socket.AF_INET
        self._peer: socket.socket | None = None
        self._listener = socket.socket(family, socket.SOCK_STREAM)
        self._listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        self._listener.setsockopt(socket.SOL_SOCKET, socket.SO_SNDBUF, SEND_BUFFER)
        try:
            self._listener.bind((host, port))
        except (OSError, OverflowError) as refused:
            self._listener.close()
            taken = isinstance(refused, OSError) and refused.errno == errno.EADDRINUSE
            remedy = "choose another port" if taken else "choose an address of this machine"
            raise CannotConnect(f"cannot listen there: {getattr(refused, 'strerror', None) or refused}",
                                where=f"{host}:{port}", remedy=remedy) from None
        self._listener.listen(4)
        self._listener.setblocking(False)
        name = self._listener.getsockname()
        self.name = f"{host}:{name[1]}"

    def look(self) -> None:
        """Take a host that called."""
        try:
            peer, _ = self._listener.accept()
        except OSError:
            return
        if self._peer is not None:
            peer.close()
            return
        peer.setblocking(False)
        peer.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self._peer = peer
        self._found(peer.fileno())

    def close(self) -> None:
        """Hang up and stop listening."""
        super().close()
        self._listener.close()

    def _lost(self) -> None:
        super()._lost()
        if self._peer is not None:
            self._peer.close()
            self._peer = None


def parse_address(text: str) -> tuple[str, int]:
    """Read ``HOST:PORT`` (``[::1]:5025`` for IPv6); port 0 takes a free one."""
    host, colon, port = text.rpartition(":")
    if not colon or not host or not (port.isascii() and port.isdigit()) or int(port) > 65535:
        raise UsageFault("HOST:PORT such as '127.0.0.1:0'", repr(text), "tcp")
    return host.strip("[]"), int(port)
