"""Reading and writing one non-blocking descriptor on the event loop: thirty dull lines.

pyserial opens and configures; it never reads or writes here, because its write with no timeout spins for ever when
the peer stops draining.  Nothing is buffered: what the descriptor does not take is handed back to the caller.
"""

import asyncio
import os
from collections.abc import Callable

READ_MAX = 4096


class DescriptorPort:
    """Calls ``on_bytes(data)`` for what arrives, ``on_room()`` when writing is possible again, ``on_gone(reason)``."""

    def __init__(self, fd: int, name: str, close: Callable[[], None]) -> None:
        self.fd, self.name = fd, name
        self._close = close
        self._loop: asyncio.AbstractEventLoop | None = None
        self._on_bytes: Callable[[bytes], None] = lambda data: None
        self._on_room: Callable[[], None] = lambda: None
        self._on_gone: Callable[[str], None] = lambda reason: None

    def attach(self, on_bytes: Callable[[bytes], None], on_room: Callable[[], None],
               on_gone: Callable[[str], None]) -> None:
        """Start reading on the running loop."""
        os.set_blocking(self.fd, False)
        self._loop = asyncio.get_running_loop()
        self._on_bytes, self._on_room, self._on_gone = on_bytes, on_room, on_gone
        self._loop.add_reader(self.fd, self._readable)

    def write_nowait(self, data: bytes) -> bytes:
        """Write what the descriptor takes now and return the rest; ``on_room`` follows when there is a rest."""
        if self._loop is None:
            return b""
        try:
            sent = os.write(self.fd, data)
        except BlockingIOError:
            sent = 0
        except OSError as error:
            self._gone(str(error))
            return b""
        if sent < len(data):
            self._loop.add_writer(self.fd, self._writable)
        return data[sent:]

    def close(self) -> None:
        """Stop and close; harmless when done twice."""
        if self._loop is not None:
            self._loop.remove_reader(self.fd)
            self._loop.remove_writer(self.fd)
            self._loop = None
            self._close()

    def _readable(self) -> None:
        try:
            data = os.read(self.fd, READ_MAX)
        except BlockingIOError:
            return
        except OSError as error:
            self._gone(str(error))
            return
        if data:
            self._on_bytes(data)
        else:
            self._gone("closed by the other side")

    def _writable(self) -> None:
        if self._loop is not None:
            self._loop.remove_writer(self.fd)
            self._on_room()

    def _gone(self, reason: str) -> None:
        on_gone, self._on_gone = self._on_gone, lambda reason: None
        self.close()
        on_gone(reason)
