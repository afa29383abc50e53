"""The recorder: takes entries from the event loop's thread, packs and writes them in a thread of its own.

Theory.  ``put`` only appends to a bounded queue, so that neither packing nor a slow disk can hold the protective path.
The thread empties the queue every ``PERIOD_S``, writes the whole batch with one call and syncs at least every
``SYNC_S``: what a power cut can take is less than a second.  Nothing is dropped in silence: where the queue is full or
the disk refuses, ``failed`` is set, ``on_failed`` is called once (from whichever thread noticed), what comes after is
still written if it can be, and the record says what is absent: a LOST entry where the queue was full, sequence numbers
passed over where the disk refused.  A failed fsync is never taken back: what it covered may be gone.
"""

import fcntl
import os
import struct
import threading
import time
from collections import deque
from collections.abc import Callable
from dataclasses import dataclass
from itertools import accumulate
from pathlib import Path
from typing import BinaryIO, Protocol

from hvhost.record.blockfile import BlockWriter
from hvhost.record.entries import BlockEntry, Content, EndEntry, Json, LostEntry, MetaEntry, Outcome
from hvhost.record.folder import RunFolder, folder_fault, sync_folder
from hvhost.record.layout import EntryPacker
from hvhost.wire.frames import Block
from hvhost.words.errors import HvhostError, RecordFault

PERIOD_S = 0.05  # the queue is emptied this often
SYNC_S = 0.5  # and synced at least this often
QUEUE_MAX = 8_192  # entries: 26 s of blocks of 32 at 10 k pairs/s
CHUNK = 64  # entries packed before the interpreter is given to others
JOIN_S = 10.0
# what packing a content of a wrong form raises: never the end of the thread
PACKING = (HvhostError, struct.error, ValueError, TypeError, LookupError, AttributeError, OverflowError)


@dataclass(frozen=True, slots=True, kw_only=True)
class RecorderHealth:
    """How the recorder is: entries waiting and lost, bytes written, age of the last sync, and why it failed ('')."""

    queued: int
    lost: int
    written_bytes: int
    last_sync_age_s: float
    failed: str


class Recording(Protocol):
    """What the core's shell needs of any recorder."""

    failed: str

    def put(self, entry: Content) -> None:
        """Keep one entry; never blocks, never raises."""
        ...

    def put_block(self, arrival_s: float, block: Block) -> None:
        """Keep one block; never blocks, never raises."""
        ...

    def health(self) -> RecorderHealth:
        """Say how the recorder is."""
        ...

    def close(self, outcome: Outcome, **details: object) -> RecorderHealth:
        """Write the END entry and let go of the file; blocks until it is on disk or cannot be."""
        ...


class File(Protocol):
    """The file calls that a recorder makes; tests give one that fails."""

    def write(self, data: bytes) -> int:
        """Append bytes; returns how many were taken."""
        ...

    def sync(self) -> None:
        """Make what was written last."""
        ...

    def close(self) -> None:
        """Let go."""
        ...


class DiskFile:
    """A block file on disk, created new, locked while it is written."""

    def __init__(self, path: Path) -> None:
        self._descriptor = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL | os.O_APPEND | os.O_CLOEXEC, 0o644)
        fcntl.flock(self._descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        sync_folder(path.parent)

    def write(self, data: bytes) -> int:
        """Append bytes; returns how many were taken."""
        return os.write(self._descriptor, data)

    def sync(self) -> None:
        """Make what was written last."""
        os.fdatasync(self._descriptor)

    def close(self) -> None:
        """Let go of file and lock."""
        os.close(self._descriptor)


def _end(outcome: Outcome, failed: str, entries: int, lost: int, details: dict[str, object]) -> EndEntry:
    """Return the last entry; ``entries`` is how many stand before it."""
    return EndEntry({"outcome": outcome.value, "failed": failed, "entries": entries, "lost": lost, **details})


def _ignored(reason: str) -> None:
    """Nobody asked to be told."""


class Recorder:
    """The recorder of one run on disk; see the module's text."""

    def __init__(self, file: File, *, mark: int, signs: str, on_failed: Callable[[str], None] = _ignored,
                 queue_max: int = QUEUE_MAX) -> None:
        self.failed = ""
        self._file = file
        self._packer = EntryPacker(mark, signs)
        self._on_failed = on_failed
        self._queue: deque[Content | tuple[float, Block]] = deque()  # a block as (arrival, block): cheapest to queue
        self._queue_max = queue_max
        self._refused = 0  # entries that a full queue refused since the last LOST entry (the caller's count)
        self._overflowed = 0  # and before it
        self._unwritten = 0  # entries that did not reach the file whole (the thread's count)
        self._written = 0
        self._told = threading.Lock()
        self._stop = threading.Event()
        self._synced_s = time.monotonic()
        self._unsynced = False
        self._thread: threading.Thread | None = None

    @classmethod
    def open(cls, folder: RunFolder, meta: Json, *, tag: int, signs: str = "uu",
             on_failed: Callable[[str], None] = _ignored) -> "Recorder":
        """Create the block file, write and sync its META entry, start the thread.

        Raises `RecordFault` where any of it fails, so that a run without a record is never energised.
        """
        try:
            recorder = cls(DiskFile(folder.blocks), mark=tag, signs=signs, on_failed=on_failed)
        except OSError as error:
            raise folder_fault(error, folder.blocks) from None
        recorder.begin(meta)
        if recorder.failed:
            recorder._file.close()
            raise RecordFault("a record that can be written", recorder.failed, str(folder.blocks),
                              "make room or choose another runs folder")
        recorder.start()
        return recorder

    def begin(self, meta: Json) -> None:
        """Write and sync the META entry in the calling thread."""
        self.put(MetaEntry(meta))
        self.step(time.monotonic() + SYNC_S)

    def start(self) -> None:
        """Start the writer thread."""
        self._thread = threading.Thread(target=self._run, name="recorder", daemon=True)
        self._thread.start()

    # ------------------------------------------------ the caller's side

    def put(self, entry: Content) -> None:
        """Queue one entry; never blocks, never raises."""
        queue = self._queue
        if len(queue) >= self._queue_max:
            self._refused += 1
            self._fail("the recorder's queue is full: the disk does not keep up")
            return
        if self._refused:
            self._own_up()
        queue.append(entry)

    def _own_up(self) -> None:
        """Say in the record how many entries the full queue refused at this place."""
        self._queue.append(LostEntry(self._refused))
        self._overflowed += self._refused
        self._refused = 0

    def put_block(self, arrival_s: float, block: Block) -> None:
        """Queue one block; never blocks, never raises."""
        if len(self._queue) >= self._queue_max or self._refused:
            self.put(BlockEntry(arrival_s, block))
        else:
            self._queue.append((arrival_s, block))

    def health(self) -> RecorderHealth:
        """Say how the recorder is; with nothing unsynced the age is zero."""
        age_s = time.monotonic() - self._synced_s if self._unsynced or self._queue else 0.0
        return RecorderHealth(queued=len(self._queue), lost=self._overflowed + self._refused + self._unwritten,
                              written_bytes=self._written, last_sync_age_s=age_s, failed=self.failed)

    def close(self, outcome: Outcome, **details: object) -> RecorderHealth:
        """Write the END entry, sync, stop the thread; not for the event loop's thread: it waits for the disk."""
        self._stop.set()
        if self._thread is not None:
            self._thread.join(JOIN_S)
            if self._thread.is_alive():
                self._fail("the disk does not answer")
                return self.health()
        self._drain()
        if self._refused:
            self._own_up()
        before = self._packer.seq + len(self._queue)
        self._queue.append(_end(outcome, self.failed, before, self._overflowed + self._unwritten, details))
        self.step(time.monotonic() + SYNC_S)
        self._file.close()
        return self.health()

    # ------------------------------------------------ the thread's side

    def _run(self) -> None:
        while not self._stop.wait(PERIOD_S):
            self.step(time.monotonic())

    def step(self, now_s: float) -> None:
        """Write what is queued and sync when due (the thread's work; tests call it with times of their own)."""
        self._drain()
        if not self._unsynced:
            self._synced_s = time.monotonic()
        elif now_s - self._synced_s >= SYNC_S:
            self._sync()

    def _drain(self) -> None:
        queue = self._queue
        while queue:
            parts = [self._packed(queue.popleft()) for _ in range(min(len(queue), CHUNK))]
            if not self._write(parts):
                return  # the next period tries again with what is queued then

    def _packed(self, entry: Content | tuple[float, Block]) -> bytes:
        try:
            if type(entry) is tuple:
                return self._packer.pack_block(*entry)
            return self._packer.pack(entry)  # type: ignore[arg-type]  # a tuple is no content
        except PACKING as error:
            self._fail(f"an entry could not be packed: {error}")
            self._unwritten += 1
            return self._packer.pack(LostEntry(1))

    def _write(self, parts: list[bytes]) -> bool:
        """Write one batch; what does not reach the file whole is counted, and its sequence numbers stay absent."""
        data, done = b"".join(parts), 0
        try:
            while done < len(data):
                done += self._file.write(data[done:] if done else data)
        except OSError as error:
            self._fail(f"writing the record failed: {error.strerror or error}")
        if done:
            self._unsynced = True
            self._written += done
        if done == len(data):
            return True
        for end in accumulate(map(len, parts)):
            self._unwritten += end > done
        return False

    def _sync(self) -> None:
        try:
            self._file.sync()
            self._synced_s = time.monotonic()
            self._unsynced = False
        except OSError as error:
            self._fail(f"syncing the record failed: {error.strerror or error}")

    def _fail(self, reason: str) -> None:
        with self._told:
            if self.failed:
                return
            self.failed = reason
        self._on_failed(reason)


class InlineRecorder:
    """The same record without thread, clock or queue: entries are written as they come, equal ones to equal bytes."""

    def __init__(self, file: BinaryIO, meta: Json, *, tag: int, signs: str = "uu",
                 on_failed: Callable[[str], None] = _ignored) -> None:
        self.failed = ""
        self._file = file
        self._writer = BlockWriter(file, mark=tag, signs=signs)
        self._on_failed = on_failed
        self._lost = 0
        self.put(MetaEntry(meta))

    @classmethod
    def open(cls, folder: RunFolder, meta: Json, *, tag: int, signs: str = "uu",
             on_failed: Callable[[str], None] = _ignored) -> "InlineRecorder":
        """Create the block file and write its META entry; raises `RecordFault` where that fails."""
        try:
            recorder = cls(folder.blocks.open("xb"), meta, tag=tag, signs=signs, on_failed=on_failed)
        except OSError as error:
            raise folder_fault(error, folder.blocks) from None
        if recorder.failed:
            raise RecordFault("a record that can be written", recorder.failed, str(folder.blocks))
        return recorder

    def put(self, entry: Content) -> None:
        """Write one entry."""
        try:
            self._writer.put(entry)
        except (OSError, *PACKING) as error:
            self._fail(error)

    def put_block(self, arrival_s: float, block: Block) -> None:
        """Write one block."""
        try:
            self._writer.put_block(arrival_s, block)
        except (OSError, *PACKING) as error:
            self._fail(error)

    def health(self) -> RecorderHealth:
        """Say how the recorder is; nothing ever waits."""
        return RecorderHealth(queued=0, lost=self._lost, written_bytes=self._writer.written_bytes,
                              last_sync_age_s=0.0, failed=self.failed)

    def close(self, outcome: Outcome, **details: object) -> RecorderHealth:
        """Write the END entry and close the file."""
        self.put(_end(outcome, self.failed, self._writer.entries, self._lost, details))
        try:
            self._file.close()
        except OSError as error:
            self._fail(error)
        return self.health()

    def _fail(self, error: Exception) -> None:
        self._lost += 1
        if not self.failed:
            self.failed = f"writing the record failed: {error}"
            self._on_failed(self.failed)
