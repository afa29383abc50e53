"""A local server in a thread of its own, for tests of the synchronous client and the commands."""

import asyncio
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from hvhost.publish.conversation import Peer
from hvhost.publish.local import LocalLimits, LocalServer
from hvhost.publish.snapshot import Snapshot
from hvhost.words.errors import CommandRefused


class FakeBench:
    """Plays the daemon: keeps what was asked, answers by method, publishes from its loop."""

    def __init__(self, path: str) -> None:
        self.path = path
        self.asked: list[tuple[str, dict[str, Any]]] = []
        self.answers: dict[str, Any] = {"cut": {"text": "cut 1 sent"}, "lower": {"text": "lowering"}}
        self.on_call: Callable[[str], None] = lambda method: None
        self.gone: list[Peer] = []
        self.notes: list[str] = []
        self.server: LocalServer | None = None
        self.loop: asyncio.AbstractEventLoop | None = None

    def handle(self, method: str, params: dict[str, Any], peer: Peer) -> Any:
        """Answer from the table, refuse the rest."""
        self.asked.append((method, params))
        self.on_call(method)
        if method not in self.answers:
            raise CommandRefused("a method that this bench knows", method, "request", "see the list")
        answer = self.answers[method]
        if isinstance(answer, Exception):
            raise answer
        return answer

    def publish(self, snapshot: Snapshot) -> None:
        """Offer a snapshot from the server's own loop and wait until that is done."""
        assert self.loop is not None
        done = threading.Event()

        def offer() -> None:
            assert self.server is not None
            self.server.offer_nowait(snapshot)
            done.set()

        self.loop.call_soon_threadsafe(offer)
        assert done.wait(10.0)


@contextmanager
def served(folder: Path, limits: LocalLimits | None = None, name: str = "demo.sock") -> Iterator[FakeBench]:
    """Serve a fake bench in ``folder`` while the block runs."""
    bench = FakeBench(str(folder / name))
    ready, end = threading.Event(), asyncio.Event()

    async def serve() -> None:
        bench.loop = asyncio.get_running_loop()
        bench.server = LocalServer(bench.path, bench.handle, peer_gone=bench.gone.append, note=bench.notes.append,
                                   limits=limits)
        await bench.server.open()
        ready.set()
        await end.wait()
        await bench.server.close()

    thread = threading.Thread(target=lambda: asyncio.run(serve()), daemon=True)
    thread.start()
    assert ready.wait(10.0)
    try:
        yield bench
    finally:
        assert bench.loop is not None
        bench.loop.call_soon_threadsafe(end.set)
        thread.join(10.0)
