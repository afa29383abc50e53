"""Events that wait for a broker, on disk: bounded, in order, through restarts; at least once, never twice one number.

Everything here waits for the disk, so one thread of the outlet's calls it and nobody else.  In a folder of its own:

- ``identity``: 16 hexadecimal digits, made once; locked while a daemon uses the folder.
- ``events-<number>.log``: lines ``<crc32> <number> <payload>``, numbers rising by one; at most SEGMENT_LINES a file.
  A start begins a new file, so nothing is ever written behind a torn tail.
- ``delivered``: two slots that are written in turn, each with a CRC; losing the newer one repeats events, no more.

A line counts only once fsync has returned, and only then may it be sent: a number that left the machine is never
given to another event after a power cut.  A damaged line is skipped and counted.
"""

import fcntl
import os
import re
import secrets
import zlib
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from hvhost.publish.mqtt.messages import encode
from hvhost.words.errors import RecordFault

SEGMENT_LINES = 1000
SLOT = 64  # bytes: less than a sector, so that a power cut spoils one slot at most
LONGEST_LINE = 8192
_NAME = re.compile(r"events-([0-9]{19})\.log")


@dataclass(slots=True)
class Segment:
    """One file: its first number and how many lines it was given."""

    first: int
    path: Path
    lines: int = 0


class DiskQueue:
    """See the module's text.  ``most`` bounds the events kept; beyond it the oldest go, a file at a time, counted."""

    def __init__(self, folder: Path, most: int, fsync: Callable[[int], None] = os.fsync) -> None:
        self.folder, self._most, self._fsync = folder, most, fsync
        self.identity = ""
        self.delivered = 0
        self.last = 0
        self.lost = 0
        self.damaged = 0
        self._segments: list[Segment] = []
        self._writing: int | None = None
        self._lock: int | None = None
        self._slot = 0
        self._cursor: tuple[Path, int, int] | None = None  # file, offset, number of the next line

    # ------------------------------------------------------------ opening

    def open(self) -> None:
        """Lock the folder and find what waits; raises `RecordFault` where the folder is unfit or in use."""
        try:
            self.folder.mkdir(mode=0o700, parents=True, exist_ok=True)
            self._lock = os.open(self.folder / "identity", os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o600)
            fcntl.flock(self._lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
            self._find()
        except BlockingIOError:
            self.close()
            raise RecordFault("a folder of this daemon's own", "one that another daemon uses", str(self.folder),
                              "give this bench an mqtt.queue_folder of its own") from None
        except OSError as error:
            self.close()
            raise RecordFault("a folder for waiting events", error.strerror or str(error), str(self.folder),
                              "see its permissions and the disk, or name another with mqtt.queue_folder") from None

    def _find(self) -> None:
        names = sorted(name for name in os.listdir(self.folder) if _NAME.fullmatch(name))
        self._segments = [Segment(first=int(name[7:26]), path=self.folder / name) for name in names]
        for early, late in zip(self._segments, self._segments[1:], strict=False):
            early.lines = late.first - early.first
        self.delivered = self._read_delivered()
        if self._segments:
            newest = self._segments[-1]
            newest.lines = self._count(newest)
            self.last = newest.first + newest.lines - 1
            self.delivered = max(self.delivered, self._segments[0].first - 1)
        self.last = max(self.last, self.delivered)
        self._identify()

    def _identify(self) -> None:
        """Read who we are; a new or damaged identity begins a new series of ids, so that no id means two events."""
        assert self._lock is not None
        found = os.pread(self._lock, 64, 0).decode("ascii", "replace").strip()
        if re.fullmatch(r"[0-9a-f]{16}", found):
            self.identity = found
            return
        self.identity = secrets.token_hex(8)
        os.pwrite(self._lock, f"{self.identity}\n".encode(), 0)
        os.ftruncate(self._lock, 17)
        os.fsync(self._lock)
        self._sync_folder()

    def _count(self, segment: Segment) -> int:
        """Lines that the newest file was given: with damage in it, as many as it may hold, so no number returns."""
        last, damage = segment.first - 1, False
        for number, _, _ in _lines(segment.path, 0):
            if number is None:
                damage = True
            else:
                last = max(last, number)
        return SEGMENT_LINES if damage else last - segment.first + 1

    def _read_delivered(self) -> int:
        try:
            raw = (self.folder / "delivered").read_bytes()[: 2 * SLOT]
        except FileNotFoundError:
            return 0
        best = 0
        for at in (0, SLOT):
            crc, _, number = raw[at:at + SLOT].decode("ascii", "replace").strip().partition(" ")
            if number.isdecimal() and crc == _crc(number.encode()):
                best = max(best, int(number))
        return best

    # ------------------------------------------------------------ using

    @property
    def is_open(self) -> bool:
        """Whether the folder is ours."""
        return self._lock is not None

    @property
    def waiting(self) -> int:
        """Events that are on disk and not delivered."""
        return max(0, self.last - self.delivered)

    def append(self, payloads: list[Mapping[str, Any]]) -> None:
        """Number the payloads, write them and wait for the disk; raises OSError, and then none of them counts."""
        at = 0
        while at < len(payloads):
            at += self._append_some(payloads[at:])
        self._bound()

    def _append_some(self, payloads: list[Mapping[str, Any]]) -> int:
        if self._writing is None or self._segments[-1].lines >= SEGMENT_LINES:
            self._begin()
        segment, fd = self._segments[-1], self._writing
        assert fd is not None
        some = payloads[: SEGMENT_LINES - segment.lines]
        data = b"".join(self._line(self.last + 1 + n, payload) for n, payload in enumerate(some))
        try:
            written = 0
            while written < len(data):
                written += os.write(fd, data[written:])
            self._fsync(fd)
        except OSError:
            self._abandon()  # what a failed fsync left in the cache is not to be trusted
            raise
        segment.lines += len(some)
        self.last += len(some)
        return len(some)

    def _line(self, number: int, payload: Mapping[str, Any]) -> bytes:
        body = encode({**payload, "seq": number, "id": f"{self.identity}-{number}"})
        numbered = b"%d %s" % (number, body)
        return f"{_crc(numbered)} ".encode() + numbered + b"\n"

    def _begin(self) -> None:
        self._abandon()
        path = self.folder / f"events-{self.last + 1:019d}.log"
        flags = os.O_WRONLY | os.O_CREAT | os.O_TRUNC | os.O_APPEND | os.O_CLOEXEC
        self._writing = os.open(path, flags, 0o600)
        if not self._segments or self._segments[-1].path != path:
            self._segments.append(Segment(first=self.last + 1, path=path))
        self._segments[-1].lines = 0
        self._cursor = None
        self._sync_folder()

    def _abandon(self) -> None:
        if self._writing is not None:
            os.close(self._writing)
            self._writing = None

    def read(self, after: int, most: int) -> list[tuple[int, bytes]]:
        """Up to ``most`` events with numbers above ``after``, as (number, payload); empty where none waits."""
        found: list[tuple[int, bytes]] = []
        wanted = max(after, self.delivered) + 1
        for at, segment in enumerate(self._segments):
            end = self._segments[at + 1].first if at + 1 < len(self._segments) else self.last + 1
            if end <= wanted:
                continue
            offset = 0
            if self._cursor is not None and self._cursor[0] == segment.path and self._cursor[2] <= wanted:
                offset = self._cursor[1]
            for number, payload, next_offset in _lines(segment.path, offset):
                if number is None:
                    self.damaged += 1
                    self._cursor = (segment.path, next_offset, wanted)
                elif wanted <= number < end:
                    found.append((number, payload))
                    wanted = number + 1
                    self._cursor = (segment.path, next_offset, wanted)
                    if len(found) >= most:
                        return found
        if not found and wanted <= self.last:
            self.deliver(self.last)  # what is left is damaged, and counted as such
        return found

    def deliver(self, number: int) -> None:
        """Everything up to this number has been taken by the broker: forget it."""
        if number <= self.delivered:
            return
        self.delivered = number
        self._note_delivered()
        while len(self._segments) > 1 and self._segments[1].first <= number + 1:
            self._drop()

    def _note_delivered(self) -> None:
        number = str(self.delivered).encode()
        fd = os.open(self.folder / "delivered", os.O_WRONLY | os.O_CREAT | os.O_CLOEXEC, 0o600)
        try:
            os.pwrite(fd, f"{_crc(number)} {self.delivered}".ljust(SLOT - 1).encode() + b"\n", self._slot * SLOT)
        finally:
            os.close(fd)
        self._slot = 1 - self._slot

    def _drop(self) -> None:
        segment = self._segments.pop(0)
        segment.path.unlink(missing_ok=True)

    def _bound(self) -> None:
        while self.waiting > self._most and len(self._segments) > 1:
            gone = self._segments[1].first - 1
            self.lost += gone - self.delivered
            self.deliver(gone)

    def _sync_folder(self) -> None:
        fd = os.open(self.folder, os.O_RDONLY | os.O_DIRECTORY | os.O_CLOEXEC)
        try:
            os.fsync(fd)
        finally:
            os.close(fd)

    def close(self) -> None:
        """Let go of the folder."""
        self._abandon()
        if self._lock is not None:
            os.close(self._lock)
            self._lock = None


def _crc(data: bytes) -> str:
    return f"{zlib.crc32(data):08x}"


def _lines(path: Path, offset: int) -> Iterator[tuple[int | None, bytes, int]]:
    """(number, payload, offset behind it) of each line; number None for a damaged one, whatever its length."""
    try:
        file = path.open("rb")
    except FileNotFoundError:
        return
    with file:
        file.seek(offset)
        while line := file.readline(LONGEST_LINE):
            crc, _, numbered = line.rstrip(b"\n").partition(b" ")
            number, _, payload = numbered.partition(b" ")
            sound = line.endswith(b"\n") and number.isdigit() and crc == _crc(numbered).encode()
            yield (int(number) if sound else None), payload, file.tell()
