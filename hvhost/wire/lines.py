"""Framing: printable ASCII lines with length and CRC-32, and a reader with a ceiling.

A line is ``body*LLLCCCCCCCC\\n``: ``LLL`` is the body's length in bytes and ``C...`` its CRC-32 (ISO-HDLC, the one
of zlib), both in upper-case hexadecimal.  See PROTOCOL.md section 2.
"""

from dataclasses import dataclass
from zlib import crc32

LINE_MAX = 512  # bytes with LF: a block of 64 pairs needs about 420
TRAILER = 12  # '*', three digits of length, eight of CRC
PRINTABLE = bytes(range(0x20, 0x7F))
HEX = frozenset(b"0123456789ABCDEF")


@dataclass(frozen=True, slots=True)
class Garbled:
    """A line that was dropped: why, and how many bytes went with it."""

    reason: str
    size: int


def seal(body: bytes) -> bytes:
    """Return the whole line for ``body``: trailer and LF added."""
    return b"%b*%03X%08X\n" % (body, len(body), crc32(body))


def unseal(line: bytes) -> bytes | Garbled:
    """Return the body of one line (without LF), or why it is dropped; whole lines are told at once, for speed."""
    size = len(line) - TRAILER
    if size > 0:
        body = line[:size]
        if line[size:] == b"*%03X%08X" % (size, crc32(body)) and not body.translate(None, PRINTABLE):
            return body
    return _garbled(line, size)


def _garbled(line: bytes, size: int) -> Garbled:
    """Say what is wrong with a line that does not equal what it should be."""
    if size < 1 or line[size] != 0x2A:
        return Garbled("no trailer", len(line))
    tail = line[size + 1 :]
    if not HEX.issuperset(tail):
        return Garbled("trailer not hexadecimal", len(line))
    if int(tail[:3], 16) != size:
        return Garbled("length", len(line))
    if int(tail[3:], 16) != crc32(line[:size]):
        return Garbled("crc", len(line))
    return Garbled("not printable", len(line))


class LineReader:
    """Splits a byte stream into bodies; bounded, and resynchronised at the next LF after anything over-long."""

    __slots__ = ("_rest", "_skipped", "_skipping")

    def __init__(self) -> None:
        self._rest = b""
        self._skipping = False
        self._skipped = 0

    def feed(self, data: bytes) -> list[bytes | Garbled]:
        """Take bytes, return the bodies and the dropped lines that they complete; empty lines are silent."""
        parts = (self._rest + data).split(b"\n")
        self._rest = parts.pop()
        out: list[bytes | Garbled] = []
        for part in parts:
            if self._skipping:
                self._skipping = False
                out.append(Garbled("too long", self._skipped + len(part)))
            elif len(part) >= LINE_MAX:
                out.append(Garbled("too long", len(part)))
            elif part:
                out.append(unseal(part))
        if len(self._rest) >= LINE_MAX:
            self._skipped = len(self._rest) + (self._skipped if self._skipping else 0)
            self._skipping = True
            self._rest = b""
        elif self._skipping:
            self._skipped += len(self._rest)
            self._rest = b""
        return out
