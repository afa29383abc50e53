"""The block file: append-only entries that identify and prove themselves, and a reader that survives any damage.

Theory.  After a kill or a power cut the file may end anywhere, may have a tail of zeros, and later a bit may turn over.
So nothing in the file points to anything else: each entry carries a magic number, its own length, a sequence number
and a CRC-32 over all of it.  The reader goes from entry to entry; where one does not prove itself it searches for the
next that does, and says what lay between.  Sequence numbers tell how many entries are absent, so that nothing can be
lost in silence.  Nothing is ever repaired in the file itself.
"""

import mmap
import struct
from collections.abc import Iterator
from pathlib import Path
from typing import Protocol
from zlib import crc32

from hvhost.record.entries import Content, Damage, DamageKind, Entry, EntryKind, MetaEntry
from hvhost.record.layout import CRC, HEAD, LENGTH_MAX, MAGIC, OVERHEAD, PACKED, U32, EntryPacker, RawEntry, decode
from hvhost.record.pack import unpack_payload
from hvhost.wire.frames import Block
from hvhost.words.errors import RecordFault

Buffer = bytes | mmap.mmap


class Sink(Protocol):
    """What a block file is written to."""

    def write(self, data: bytes, /) -> int | None:
        """Append bytes."""
        ...


class BlockWriter:
    """Writes entries to a sink at once, one write each; no clock, no thread, so equal contents give equal bytes."""

    __slots__ = ("_packer", "_sink", "written_bytes")

    def __init__(self, sink: Sink, *, mark: int = 0, signs: str = "uu") -> None:
        self._sink = sink
        self._packer = EntryPacker(mark, signs)
        self.written_bytes = 0

    @property
    def entries(self) -> int:
        """How many entries were written."""
        return self._packer.seq

    def put(self, content: Content) -> None:
        """Append one entry."""
        self._append(self._packer.pack(content))

    def put_block(self, arrival_s: float, block: Block) -> None:
        """Append one block."""
        self._append(self._packer.pack_block(arrival_s, block))

    def _append(self, data: bytes) -> None:
        self._sink.write(data)
        self.written_bytes += len(data)


# ---------------------------------------------------------------- reading


def _proven(buffer: Buffer, at: int, size: int, mark: int | None) -> RawEntry | None:
    """Return the entry that stands whole at ``at``, or None."""
    if at + OVERHEAD > size:
        return None
    magic, kind, flags, its_mark, length, seq = HEAD.unpack_from(buffer, at)
    end = at + HEAD.size + length
    if magic != MAGIC or length > LENGTH_MAX or end + CRC.size > size or (mark is not None and its_mark != mark):
        return None
    if CRC.unpack_from(buffer, end)[0] != crc32(buffer[at:end]):
        return None
    return RawEntry(at, kind, flags, seq, at + HEAD.size, end)


def mark_of(buffer: Buffer) -> int | None:
    """Return the mark of the first proven entry, None where there is none."""
    size, at = len(buffer), 0
    while (at := buffer.find(MAGIC, at)) >= 0:
        if _proven(buffer, at, size, None) is not None:
            return int(HEAD.unpack_from(buffer, at)[3])
        at += 1
    return None


def scan(buffer: Buffer) -> Iterator[RawEntry | Damage]:
    """Yield every proven entry in file order, and between them what is damaged or absent."""
    size, at, expected = len(buffer), 0, 0
    mark = mark_of(buffer)
    while at < size:
        entry = _proven(buffer, at, size, mark)
        start = at
        while entry is None and (at := buffer.find(MAGIC, at + 1)) >= 0:
            entry = _proven(buffer, at, size, mark)
        if entry is None:
            yield from _tail(buffer, start, size)
            return
        ahead = (entry.seq - expected) & U32
        if ahead >= 1 << 31:
            yield Damage(entry.offset, entry.end + CRC.size - entry.offset, DamageKind.REPEATED, 0,
                         f"sequence number {entry.seq} again, {expected} expected")
        else:
            if at > start or ahead:
                yield _between(buffer, start, at, ahead)
            yield entry
            expected = (entry.seq + 1) & U32
        at = entry.end + CRC.size


def _between(buffer: Buffer, start: int, end: int, missing: int) -> Damage:
    """Describe what lies between two proven entries."""
    what = f"{missing} {'entry' if missing == 1 else 'entries'} lost"
    if end == start:
        return Damage(start, 0, DamageKind.MISSING, missing, f"sequence numbers passed over, {what}")
    if not any(buffer[start:end]):
        return Damage(start, end - start, DamageKind.ZEROED, missing, f"{end - start} zero bytes, {what}")
    return Damage(start, end - start, DamageKind.BROKEN, missing, f"{end - start} bytes prove no entry, {what}")


def _tail(buffer: Buffer, start: int, size: int) -> Iterator[Damage]:
    """Describe a file's end that proves no entry: a torn entry, zeros, or both; how many entries it was is unknown."""
    rest = bytes(buffer[start:size])
    solid = len(rest.rstrip(b"\0"))
    if solid > 0 and len(rest) - solid < OVERHEAD:
        solid = len(rest)  # a few zeros at the end of a torn entry are its own
    if solid:
        torn = MAGIC.startswith(rest[: len(MAGIC)]) or rest.startswith(MAGIC)
        kind = DamageKind.TORN if torn else DamageKind.BROKEN
        yield Damage(start, solid, kind, 1, f"the file ends in {solid} bytes of no whole entry, at least 1 entry lost")
    if solid < len(rest):
        zeros = len(rest) - solid
        yield Damage(start + solid, zeros, DamageKind.ZEROED, 0, f"the file ends in {zeros} zero bytes")


def open_buffer(path: Path) -> Buffer:
    """Map a block file for reading; raises RecordFault where that cannot be done."""
    try:
        with path.open("rb") as file:
            if path.stat().st_size == 0:
                return b""
            return mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ)
    except OSError as error:
        raise RecordFault("a readable block file", error.strerror or str(error), str(path),
                          "check the path and its permissions") from None


def entry_of(buffer: Buffer, raw: RawEntry) -> Entry | Damage:
    """Read the content of a proven entry; one of an unknown kind or form is reported."""
    size = raw.end + CRC.size - raw.offset
    try:
        kind = EntryKind(raw.kind)
    except ValueError:
        return Damage(raw.offset, size, DamageKind.UNKNOWN, 1, f"kind {raw.kind} is not known to this version")
    try:
        flags, payload = raw.flags, bytes(buffer[raw.start : raw.end])
        if flags & PACKED:
            flags, payload = unpack_payload(kind, flags, payload)
        return Entry(raw.offset, size, raw.seq, kind, decode(kind, flags, payload))
    except (ValueError, TypeError, KeyError, struct.error) as error:
        return Damage(raw.offset, size, DamageKind.BROKEN, 1, f"{kind.name} entry of another form: {error}")


def read_buffer(buffer: Buffer) -> Iterator[Entry | Damage]:
    """Yield entries and damages of a block file in memory."""
    for found in scan(buffer):
        yield found if isinstance(found, Damage) else entry_of(buffer, found)


def read_blocks(path: Path) -> Iterator[Entry | Damage]:
    """Yield every whole entry of a block file, live or at rest, and every damage at its place."""
    yield from read_buffer(open_buffer(path))


def read_meta(path: Path) -> MetaEntry | None:
    """Return the META entry at the file's beginning, None where it is damaged."""
    for found in read_blocks(path):
        if isinstance(found, Entry):
            return found.content if isinstance(found.content, MetaEntry) else None
    return None
