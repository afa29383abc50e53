"""Events on their way from snapshots to the disk: picked by number, numbered by the queue, written by one thread.

The loop only ever touches a bounded list; each call of the disk goes to a thread of its own, so that a slow or full
disk stalls neither the loop nor other work in threads.
"""

import asyncio
from collections import deque
from collections.abc import Callable, Mapping
from concurrent.futures import ThreadPoolExecutor
from typing import Any, ParamSpec, TypeVar

from hvhost.publish.mqtt.diskqueue import DiskQueue
from hvhost.publish.mqtt.messages import text
from hvhost.publish.snapshot import Severity, Snapshot

FRESH_KEPT = 2000  # events in memory while the disk does not take them
BATCH = 256
AGAIN_S = 2.0  # after a disk that failed

P = ParamSpec("P")
T = TypeVar("T")


class Waiting:
    """The events of one station.  ``say`` tells the operator; ``stored`` is set whenever more are on disk."""

    def __init__(self, queue: DiskQueue, say: Callable[[str], None]) -> None:
        self.queue, self._say = queue, say
        self.stored = asyncio.Event()
        self.lost = 0
        self.failed = 0
        self._fresh: deque[Mapping[str, Any]] = deque()
        self._came = asyncio.Event()
        self._seen = 0
        self._thread: ThreadPoolExecutor | None = None
        self._storing: asyncio.Future[bool] | None = None

    @property
    def lost_in_all(self) -> int:
        """Events that nobody will get: not seen, not kept in memory, dropped on disk, or damaged there."""
        return self.lost + self.queue.lost + self.queue.damaged

    def pick(self, snapshot: Snapshot) -> None:
        """Take the event lines that are new; a jump of their numbers is counted."""
        for line in snapshot.events:
            if line.number <= self._seen:
                continue
            self.lost += line.number - self._seen - 1
            self._seen = line.number
            self.add(line.utc_ns, line.severity, line.text, snapshot)

    def add(self, utc_ns: int, severity: Severity, words: str, snapshot: Snapshot | None = None) -> None:
        """Keep one event; where memory is full because the disk takes none, the oldest goes."""
        event: dict[str, Any] = {"t": utc_ns, "severity": str(severity), "text": text(words)}
        if snapshot is not None:
            event["rehearsal"] = snapshot.rehearsal
            if snapshot.run is not None:
                event["run"] = text(snapshot.run.run_id)
        if len(self._fresh) >= FRESH_KEPT:
            self._fresh.popleft()
            self.lost += 1
        self._fresh.append(event)
        self._came.set()

    async def call(self, act: Callable[P, T], *args: P.args, **kwargs: P.kwargs) -> T:
        """Do something with the queue in its thread."""
        return await asyncio.get_running_loop().run_in_executor(self._thread, lambda: act(*args, **kwargs))

    async def open(self) -> None:
        """Find what waits from before; raises `RecordFault`."""
        self._thread = ThreadPoolExecutor(1, thread_name_prefix="mqtt-queue")
        await self.call(self.queue.open)
        if self.queue.waiting:
            self.stored.set()

    async def store(self) -> None:
        """Bring events to the disk as they come, for ever."""
        while True:
            await self._came.wait()
            self._storing = asyncio.ensure_future(self._store_some())
            if not await asyncio.shield(self._storing):  # what the thread has begun ends: or it would be written twice
                await asyncio.sleep(AGAIN_S)

    async def _store_some(self) -> bool:
        self._came.clear()
        while self._fresh:
            batch = [self._fresh[n] for n in range(min(BATCH, len(self._fresh)))]
            lost_before = self.lost
            try:
                await self.call(self.queue.append, batch)
            except OSError as error:
                self.failed += 1
                if self.failed == 1 or self.failed % 100 == 0:
                    self._say(f"mqtt: events cannot be kept on disk: {error.strerror}; {len(self._fresh)} wait in "
                              f"memory; make room in {self.queue.folder}")
                self._came.set()
                return False
            for _ in range(len(batch) - (self.lost - lost_before)):  # what overflowed meanwhile has gone already
                self._fresh.popleft()
            self.stored.set()
        return True

    async def close(self) -> None:
        """Write what is left, once, and let go of the folder; what could not be written stays for the next `open`."""
        if self._thread is None:
            return
        try:
            if self._storing is not None:
                await self._storing
            if self._fresh and self.queue.is_open:
                await self._store_some()
        finally:
            await self.call(self.queue.close)
            self._thread.shutdown(wait=False)
            self._thread = None
