"""The form at rest: each entry's payload made shorter by itself, so that damage still costs one entry only.

Compressing a stretch of the file as a whole would be a little smaller, but one flipped bit would then take the whole
stretch along.  Blocks: codes less the channel's smallest one, in as few bits as their range needs.  Texts: zlib.  Sent
lines: without the trailer that the body determines.  FORMAT.md, section 6.
"""

import struct
from contextlib import suppress
from zlib import compress, decompressobj

from hvhost.record.entries import EntryKind
from hvhost.record.layout import (
    AS_TEXT,
    FIXED,
    FIXED_SIZE,
    LENGTH_MAX,
    PACKED,
    pair_format,
    signs_of,
)
from hvhost.wire.lines import seal

FIXED_PACKED = "dIIHHBBHHHHB"  # as FIXED, with 16 bits for missed, event and arc
FRAME = struct.Struct("<" + FIXED_PACKED + "iBiB")  # and per channel: smallest code, bits per code
RENEW = struct.Struct("<BII")  # 0 (no line begins with it), session, index
_FIXED = struct.Struct("<" + FIXED)
_U16 = 0xFFFF
_TEXT_AT = {EntryKind.META: 0, EntryKind.END: 0, EntryKind.COMMAND: 8, EntryKind.NOTE: 8}  # where the JSON begins


def pack_payload(kind: EntryKind, flags: int, payload: bytes) -> tuple[int, bytes]:
    """Return flags and payload at rest; both unchanged where no shorter form exists."""
    shorter = payload
    if kind is EntryKind.BLOCK and not flags & AS_TEXT:
        shorter = _pack_block(flags, payload)
    elif kind is EntryKind.SENT:
        shorter = _pack_sent(payload)
    elif kind in _TEXT_AT:
        at = _TEXT_AT[kind]
        shorter = payload[:at] + compress(payload[at:], 9)
    return (flags | PACKED, shorter) if len(shorter) < len(payload) else (flags, payload)


def unpack_payload(kind: EntryKind, flags: int, payload: bytes) -> tuple[int, bytes]:
    """Return flags and payload as they were written live; ``ValueError`` or ``struct.error`` where that fails."""
    flags &= ~PACKED
    if kind is EntryKind.BLOCK:
        return flags, _unpack_block(flags, payload)
    if kind is EntryKind.SENT:
        return flags, payload[:8] + seal(_sent_body(payload[8:]))
    at = _TEXT_AT[kind]
    opened = decompressobj()
    text = opened.decompress(payload[at:], LENGTH_MAX)
    if not opened.eof:
        raise ValueError("a whole zlib stream of bounded length")
    return flags, payload[:at] + text


def _pack_sent(payload: bytes) -> bytes:
    """Drop the trailer; renewals, by far the most frequent line, become three fields."""
    body = payload[8:-13]
    if payload[8:] != seal(body):
        return payload
    verb, *words = body.split(b" ")
    if verb == b"renew" and len(words) == 2:
        with suppress(ValueError, struct.error):
            frame = RENEW.pack(0, int(words[0], 16), int(words[1]))
            if _sent_body(frame) == body:
                return payload[:8] + frame
    return payload[:8] + body


def _sent_body(packed: bytes) -> bytes:
    if packed[:1] != b"\0":
        return packed
    _, session, index = RENEW.unpack(packed)
    return b"renew %08X %d" % (session, index)


def _pack_block(flags: int, payload: bytes) -> bytes:
    *head, missed, event, arc, pairs = _FIXED.unpack_from(payload)
    if not pairs or max(missed, event, arc) > _U16:
        return payload
    codes = struct.unpack("<" + pair_format(signs_of(flags), pairs), payload[FIXED_SIZE:])
    bits = 0
    frames: list[int] = []
    for channel in (codes[0::2], codes[1::2]):
        low = min(channel)
        width = (max(channel) - low).bit_length()
        for code in channel:
            bits = bits << width | code - low
        frames += (low, width)
    used = pairs * (frames[1] + frames[3])
    size = (used + 7) >> 3
    stream: bytes = (bits << (size << 3) - used).to_bytes(size, "big")
    return FRAME.pack(*head, missed, event, arc, pairs, *frames) + stream


def _unpack_block(flags: int, payload: bytes) -> bytes:
    *fixed, pairs, v_low, v_width, i_low, i_width = FRAME.unpack_from(payload)
    stream = payload[FRAME.size :]
    used = pairs * (v_width + i_width)
    if max(v_width, i_width) > 16 or len(stream) != (used + 7) >> 3:
        raise ValueError(f"{(used + 7) >> 3} bytes of packed codes, {len(stream)} found")
    bits = int.from_bytes(stream, "big") >> (len(stream) << 3) - used
    codes = [0] * (2 * pairs)
    for at, low, width in ((1, i_low, i_width), (0, v_low, v_width)):
        rest = (1 << width) - 1
        for k in range(2 * (pairs - 1) + at, -1, -2):
            codes[k] = low + (bits & rest)
            bits >>= width
    return _FIXED.pack(*fixed, pairs) + struct.pack("<" + pair_format(signs_of(flags), pairs), *codes)
