"""Bytes of one entry: header, payload by kind, CRC-32; both directions (FORMAT.md, sections 2 and 3).

An entry is ``magic, kind, flags, mark, length, seq | payload | crc32 over all before``, little-endian.  Nothing here
touches a file.
"""

import dataclasses
import json
import struct
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any
from zlib import crc32

from hvhost.record.entries import (
    AnchorEntry,
    BlockEntry,
    CommandEntry,
    Content,
    EndEntry,
    EntryKind,
    GarbledEntry,
    Json,
    LineEntry,
    LostEntry,
    MetaEntry,
    NoteEntry,
    SentEntry,
    TimerEntry,
)
from hvhost.wire.frames import PAIRS_MAX, Block
from hvhost.words.errors import RecordFault

MAGIC = b"\xf5\x9a"  # 0xF5 stands in no UTF-8 text and in no line of the protocol
HEAD = struct.Struct("<2sBBHII")  # magic, kind, flags, mark, length of the payload, sequence number
CRC = struct.Struct("<I")
OVERHEAD = HEAD.size + CRC.size
LENGTH_MAX = 1 << 24
U32 = 0xFFFFFFFF

# flags
V_SIGNED, I_SIGNED = 1, 2  # BLOCK: the channel's 16-bit codes are signed
AS_TEXT = 4  # BLOCK: a number does not fit its field, the block follows as JSON
PACKED = 8  # at rest: a shorter form of the same payload (pack.py)

FIXED = "dIIHHBBHIIIB"  # arrival, index, tick, words, state, latched, inputs, missed, event, arc, pairs
_FIXED = struct.Struct("<" + FIXED)
FIXED_SIZE = _FIXED.size
_BLOCK_HEAD = struct.Struct(HEAD.format + FIXED)
_TIME = struct.Struct("<d")
_NANOS = struct.Struct("<q")
_ANCHOR = struct.Struct("<qdq")
_GARBLED = struct.Struct("<dI")
_LOST = struct.Struct("<Q")

Encoded = tuple[EntryKind, int, bytes]


def signs_of(flags: int) -> str:
    """Return the converters' signs ('s' or 'u' for voltage, then current) of a BLOCK's flags."""
    return ("s" if flags & V_SIGNED else "u") + ("s" if flags & I_SIGNED else "u")


def flags_of(signs: str) -> int:
    """Return the flags that say the converters' signs."""
    return (V_SIGNED if signs[0] == "s" else 0) | (I_SIGNED if signs[1] == "s" else 0)


def pair_format(signs: str, pairs: int) -> str:
    """Return the struct format of ``pairs`` pairs of 16-bit codes, voltage first."""
    return (("h" if signs[0] == "s" else "H") + ("h" if signs[1] == "s" else "H")) * pairs


class EntryPacker:
    """Turns contents into entries with consecutive sequence numbers.

    ``mark`` is 16 bits of the run's tag: an entry of another file, left by the disk in ours, does not pass for ours.
    """

    __slots__ = ("_codes", "_flags", "mark", "seq")

    def __init__(self, mark: int, signs: str = "uu", seq: int = 0) -> None:
        self.mark = mark & 0xFFFF
        self.seq = seq
        self._flags = flags_of(signs)
        # codes are packed apart from the head: joining both to one list of arguments was measured twice as slow
        self._codes = tuple(struct.Struct("<" + pair_format(signs, pairs)).pack for pairs in range(PAIRS_MAX + 1))

    def pack(self, content: Content) -> bytes:
        """Return the whole entry."""
        if type(content) is BlockEntry:
            return self.pack_block(content.arrival_s, content.block)
        return self.seal(*encode(content))

    def pack_block(self, arrival_s: float, b: Block) -> bytes:
        """Return the whole BLOCK entry; written for speed."""
        codes = b.codes
        pairs = len(codes) >> 1
        try:
            tail = b.packed or self._codes[pairs](*codes)
            head = _BLOCK_HEAD.pack(MAGIC, 2, self._flags, self.mark, FIXED_SIZE + 4 * pairs, self.seq, arrival_s,
                                    b.index, b.tick, b.v_word, b.i_word, b.state, b.latched, b.inputs, b.missed,
                                    b.event, b.arc, pairs)
        except (struct.error, IndexError):
            return self.seal(EntryKind.BLOCK, AS_TEXT, block_text(arrival_s, b))
        self.seq = (self.seq + 1) & U32
        return head + tail + CRC.pack(crc32(tail, crc32(head)))

    def seal(self, kind: EntryKind, flags: int, payload: bytes) -> bytes:
        """Return the entry of a payload that is already bytes."""
        if len(payload) > LENGTH_MAX:
            raise RecordFault(f"at most {LENGTH_MAX} bytes in one entry", str(len(payload)), f"{kind.name} entry")
        body = HEAD.pack(MAGIC, kind, flags, self.mark, len(payload), self.seq) + payload
        self.seq = (self.seq + 1) & U32
        return body + CRC.pack(crc32(body))


# ---------------------------------------------------------------- payloads


def block_text(arrival_s: float, block: Block) -> bytes:
    """Return a block as JSON: the form for numbers that no field holds."""
    fields = {field.name: getattr(block, field.name) for field in dataclasses.fields(block) if field.init}
    return _TIME.pack(arrival_s) + json_bytes(fields)


def json_bytes(data: Any) -> bytes:
    """Return strict JSON in ASCII; what JSON cannot say (NaN, infinity, other objects) becomes text."""
    try:
        return json.dumps(data, separators=(",", ":"), allow_nan=False).encode("ascii")
    except (TypeError, ValueError):
        loose = json.dumps(data, separators=(",", ":"), default=str, skipkeys=True)
        return json.dumps(json.loads(loose, parse_constant=str), separators=(",", ":")).encode("ascii")


_ENCODERS: dict[type, Callable[[Any], Encoded]] = {
    MetaEntry: lambda e: (EntryKind.META, 0, json_bytes(e.data)),
    LineEntry: lambda e: (EntryKind.LINE, 0, _TIME.pack(e.arrival_s) + e.body),
    SentEntry: lambda e: (EntryKind.SENT, 0, _TIME.pack(e.t_s) + e.line),
    CommandEntry: lambda e: (EntryKind.COMMAND, 0, _TIME.pack(e.t_s) + json_bytes(e.data)),
    TimerEntry: lambda e: (EntryKind.TIMER, 0, _TIME.pack(e.t_s)),
    NoteEntry: lambda e: (EntryKind.NOTE, 0, _NANOS.pack(e.utc_ns) + json_bytes(e.data)),
    AnchorEntry: lambda e: (EntryKind.ANCHOR, 0, _ANCHOR.pack(e.tick, e.mono_s, e.utc_ns)),
    GarbledEntry: lambda e: (EntryKind.GARBLED, 0, _GARBLED.pack(e.arrival_s, e.size & U32) + e.reason.encode()),
    LostEntry: lambda e: (EntryKind.LOST, 0, _LOST.pack(e.count)),
    EndEntry: lambda e: (EntryKind.END, 0, json_bytes(e.data)),
}


def encode(content: Content) -> Encoded:
    """Return kind, flags and payload of any content but a block."""
    return _ENCODERS[type(content)](content)


def _json(payload: bytes) -> Json:
    data = json.loads(payload)
    if not isinstance(data, dict):
        raise ValueError("a JSON object")
    return data


def _time(payload: bytes) -> float:
    return float(_TIME.unpack_from(payload)[0])


def _decode_block(flags: int, payload: bytes) -> BlockEntry:
    if flags & AS_TEXT:
        fields = dict(_json(payload[8:]))
        codes = tuple(fields.pop("codes"))
        return BlockEntry(_time(payload), Block(**fields, codes=codes))
    arrival_s, *fixed, pairs = _FIXED.unpack_from(payload)
    codes = struct.unpack("<" + pair_format(signs_of(flags), pairs), payload[FIXED_SIZE:])
    return BlockEntry(arrival_s, Block(*(*fixed, codes)))


_DECODERS: dict[EntryKind, Callable[[int, bytes], Content]] = {
    EntryKind.META: lambda f, p: MetaEntry(_json(p)),
    EntryKind.BLOCK: _decode_block,
    EntryKind.LINE: lambda f, p: LineEntry(_time(p), p[8:]),
    EntryKind.SENT: lambda f, p: SentEntry(_time(p), p[8:]),
    EntryKind.COMMAND: lambda f, p: CommandEntry(_time(p), _json(p[8:])),
    EntryKind.TIMER: lambda f, p: TimerEntry(_time(p)),
    EntryKind.NOTE: lambda f, p: NoteEntry(_NANOS.unpack_from(p)[0], _json(p[8:])),
    EntryKind.ANCHOR: lambda f, p: AnchorEntry(*_ANCHOR.unpack(p)),
    EntryKind.GARBLED: lambda f, p: _decode_garbled(p),
    EntryKind.LOST: lambda f, p: LostEntry(_LOST.unpack(p)[0]),
    EntryKind.END: lambda f, p: EndEntry(_json(p)),
}


def _decode_garbled(payload: bytes) -> GarbledEntry:
    arrival_s, size = _GARBLED.unpack_from(payload)
    return GarbledEntry(arrival_s, payload[_GARBLED.size :].decode("utf-8", "replace"), size)


def decode(kind: EntryKind, flags: int, payload: bytes) -> Content:
    """Return the content of an unpacked payload; ``ValueError`` or ``struct.error`` where it does not fit its kind."""
    return _DECODERS[kind](flags, payload)


@dataclass(frozen=True, slots=True)
class RawEntry:
    """A proven entry before its payload is read: ``buffer[start:end]`` is the payload."""

    offset: int
    kind: int
    flags: int
    seq: int
    start: int
    end: int
