"""Puts a closed block file into its form at rest: entry by entry, proven equal before the original's name is taken."""

import hashlib
import os
from dataclasses import dataclass
from pathlib import Path
from zlib import crc32

from hvhost.record.blockfile import Buffer, mark_of, open_buffer, scan
from hvhost.record.entries import Damage, EntryKind
from hvhost.record.folder import folder_fault, sync_folder
from hvhost.record.layout import CRC, HEAD, MAGIC, PACKED, RawEntry
from hvhost.record.pack import pack_payload, unpack_payload


@dataclass(frozen=True, slots=True, kw_only=True)
class Repacked:
    """What repacking did: sizes, SHA-256 of the live form, and why it was left as it was ('' where it was not)."""

    before: int
    after: int
    live_sha256: str
    left: str = ""


def live_bytes(buffer: Buffer, raw: RawEntry, mark: int) -> bytes:
    """Return the entry as it was written live."""
    if not raw.flags & PACKED:
        return bytes(buffer[raw.offset : raw.end + CRC.size])
    flags, payload = unpack_payload(EntryKind(raw.kind), raw.flags, bytes(buffer[raw.start : raw.end]))
    return _entry(raw.kind, flags, mark, raw.seq, payload)


def _entry(kind: int, flags: int, mark: int, seq: int, payload: bytes) -> bytes:
    body = HEAD.pack(MAGIC, kind, flags, mark, len(payload), seq) + payload
    return body + CRC.pack(crc32(body))


def live_hash(path: Path) -> str:
    """Return the SHA-256 that a sound block file has or had in its live form."""
    buffer = open_buffer(path)
    mark = mark_of(buffer) or 0
    digest = hashlib.sha256()
    for found in scan(buffer):
        if isinstance(found, Damage):
            digest.update(bytes(buffer[found.offset : found.offset + found.size]))
        else:
            digest.update(live_bytes(buffer, found, mark))
    return digest.hexdigest()


def repack(path: Path) -> Repacked:
    """Rewrite a block file at rest; a damaged one is left as it is, for it is evidence.

    The new file is read back whole and must give the live form's SHA-256 before it takes the name.
    """
    before = path.stat().st_size
    original = live_hash(path)
    buffer = open_buffer(path)
    if not _sound(buffer):
        return Repacked(before=before, after=before, live_sha256=original, left="damaged: left as it was found")
    temporary = path.with_name(f".{path.name}.rest")
    try:
        _write(temporary, buffer)
        if live_hash(temporary) != original:
            temporary.unlink()
            return Repacked(before=before, after=before, live_sha256=original, left="the shorter form was not equal")
        temporary.replace(path)
        sync_folder(path.parent)
    except OSError as error:
        temporary.unlink(missing_ok=True)
        raise folder_fault(error, path) from None
    return Repacked(before=before, after=path.stat().st_size, live_sha256=original)


def _sound(buffer: Buffer) -> bool:
    """Whether every byte belongs to a whole entry of a known kind."""
    known = frozenset(int(kind) for kind in EntryKind)
    return not any(isinstance(found, Damage) or found.kind not in known for found in scan(buffer))


def _write(path: Path, buffer: Buffer) -> None:
    mark = mark_of(buffer) or 0
    with path.open("wb") as file:
        for raw in scan(buffer):
            if isinstance(raw, Damage):
                continue  # none: the file was found sound
            kind = EntryKind(raw.kind)
            payload = bytes(buffer[raw.start : raw.end])
            if raw.flags & PACKED:
                file.write(buffer[raw.offset : raw.end + CRC.size])
            else:
                flags, shorter = pack_payload(kind, raw.flags, payload)
                file.write(_entry(kind, flags, mark, raw.seq, shorter))
        file.flush()
        os.fsync(file.fileno())
