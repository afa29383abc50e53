"""The instrument socket in a thread of its own, on loopback, in front of the fake bench: pictures every 20 ms."""

import asyncio
import contextlib
import socket
import threading
import time
from collections.abc import Callable, Iterator
from typing import Any

from hvhost.bench.instrument import Instrument
from hvhost.publish.instrument.server import InstrumentServer, ServerLimits
from tests.publish.instrument.fakes import BENCH, FakeBench

PICTURE_S = 0.02
LONG_S = 20.0


class Served:
    """A running server; everything about the bench is done in its own loop."""

    def __init__(self, place: Instrument, limits: ServerLimits | None) -> None:
        self.bench = FakeBench()
        self.server = InstrumentServer(BENCH, place, self.bench, limits)
        self.loop: asyncio.AbstractEventLoop | None = None
        self.failed: BaseException | None = None
        self.service: asyncio.Task[None] | None = None
        self.longest_s = 0.0  # of a turn of the loop, between pictures
        self._end = asyncio.Event()
        self._ready = threading.Event()
        self._thread = threading.Thread(target=lambda: asyncio.run(self._run()), daemon=True)
        self._clients: list[Line] = []

    def start(self) -> None:
        """Serve; raises what made it impossible."""
        self._thread.start()
        assert self._ready.wait(LONG_S)
        if self.failed is not None:
            raise self.failed

    def stop(self) -> None:
        """Disconnect everybody and end the thread."""
        for client in self._clients:
            client.close()
        if self.loop is not None and self._thread.is_alive():
            self.loop.call_soon_threadsafe(self._end.set)
        self._thread.join(LONG_S)
        assert not self._thread.is_alive()

    async def _run(self) -> None:
        self.loop = asyncio.get_running_loop()
        self.bench.now_s = self.loop.time()
        self.service = service = asyncio.create_task(self.server.serve())
        while not self.bench.said and not service.done():
            await asyncio.sleep(0.001)
        if service.done():
            self.failed = service.exception()
        self._ready.set()
        while not self._end.is_set() and self.failed is None:
            self._picture()
            await asyncio.sleep(PICTURE_S)
        service.cancel()
        with contextlib.suppress(asyncio.CancelledError, Exception):
            await service
        await asyncio.sleep(0.01)

    def _picture(self) -> None:
        assert self.loop is not None
        elapsed = self.loop.time() - self.bench.now_s
        self.longest_s = max(self.longest_s, elapsed - PICTURE_S)
        self.bench.pass_time(elapsed)
        self.server.offer_nowait(self.bench.picture())

    def end_service(self) -> None:
        """Cancel the service, as the daemon does at its end."""
        assert self.service is not None
        self.service.cancel()

    def do(self, act: Callable[[], Any]) -> Any:
        """Do something to the bench in its own loop, and wait until it is done."""
        done, results = threading.Event(), []

        def run() -> None:
            results.append(act())
            done.set()

        assert self.loop is not None
        self.loop.call_soon_threadsafe(run)
        assert done.wait(LONG_S)
        return results[0]

    def wait(self, condition: Callable[[], Any], what: str) -> Any:
        """Wait for something about the server, bounded."""
        until_s = time.monotonic() + LONG_S
        while not (found := self.do(condition)):
            assert time.monotonic() < until_s, f"waited for {what}"
            time.sleep(0.005)
        return found

    def client(self) -> "Line":
        """One more connection."""
        made = Line(self.server.port)
        self._clients.append(made)
        return made


class Line:
    """A plain socket that speaks lines."""

    def __init__(self, port: int) -> None:
        self.socket = socket.create_connection(("127.0.0.1", port), timeout=LONG_S)
        self.socket.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self._buffer = b""

    def write(self, text: str) -> None:
        """Send a line."""
        self.socket.sendall(text.encode("latin-1") + b"\n")

    def read(self) -> str:
        """The next line; '' where the other end closed."""
        while b"\n" not in self._buffer:
            try:
                data = self.socket.recv(65_536)
            except ConnectionError:
                data = b""
            if not data:
                return ""
            self._buffer += data
        line, _, self._buffer = self._buffer.partition(b"\n")
        return line.decode("ascii")

    def ask(self, text: str) -> str:
        """Send a query and read its answer."""
        self.write(text)
        return self.read()

    def close(self) -> None:
        """Go."""
        self.socket.close()


@contextlib.contextmanager
def served(limits: ServerLimits | None = None, place: Instrument | None = None) -> Iterator[Served]:
    """Serve while the block runs."""
    made = Served(place or Instrument(host="127.0.0.1", port=0), limits)
    made.start()
    try:
        yield made
    finally:
        made.stop()
