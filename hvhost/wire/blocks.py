"""Blocks of monitor codes: the one line that comes all the time, so its reading is written for speed.

A block's body is ``b index tick v_word i_word state latched inputs missed event arc pairs base64`` with optional
``key=value`` after it, which are skipped.  See PROTOCOL.md section 8.
"""

import re
import struct
from binascii import Error as Base64Error
from binascii import a2b_base64, b2a_base64
from dataclasses import field
from functools import lru_cache

from hvhost.words.errors import WireFault
from hvhost.words.values import swift

PAIRS_MAX = 64
ZERO = 0x30


@swift
class Block:
    """Up to 64 pairs of monitor codes with what the MCU did and saw at the first pair's tick."""

    index: int  # of the first sample, 32 bit, wraps
    tick: int  # of the first sample, 32 bit, wraps
    v_word: int  # words applied at that tick
    i_word: int
    state: int  # McuState
    latched: int  # 0 or 1
    inputs: int  # Inputs
    missed: int  # conversions missed since boot, 32 bit, wraps
    event: int  # number of the last event
    arc: int  # number of the last arc of this arm
    codes: tuple[int, ...]  # v0, i0, v1, i1, ...
    # the codes as they came, little-endian 16-bit: a recorder need not pack them again; '' where they did not come so
    packed: bytes = field(default=b"", init=False, compare=False, repr=False)

    @property
    def pairs(self) -> int:
        """How many pairs the block holds."""
        return len(self.codes) >> 1


type_of_pack = {"uu": ("H", "H"), "ss": ("h", "h"), "us": ("H", "h"), "su": ("h", "H")}


def pack_codes(codes: tuple[int, ...], signs: str) -> bytes:
    """Base64 of little-endian 16-bit pairs; ``signs`` says per channel whether codes are signed ('s') or not ('u')."""
    v, i = type_of_pack[signs]
    return b2a_base64(struct.pack(f"<{(v + i) * (len(codes) >> 1)}", *codes), newline=False)


_UNPACK = {(signs, n): struct.Struct(f"<{(v + i) * n}") for signs, (v, i) in type_of_pack.items()
           for n in range(1, PAIRS_MAX + 1)}


def unpack_codes(text: bytes, signs: str, pairs: int) -> tuple[int, ...]:
    """Return the codes of ``pairs`` pairs, or raise `WireFault`."""
    try:
        return _UNPACK[signs, pairs].unpack(a2b_base64(text, strict_mode=True))
    except (Base64Error, struct.error, KeyError):
        raise WireFault(f"base64 of {pairs} pairs", f"{len(text)} characters", "block") from None


def encode_block(block: Block, signs: str) -> bytes:
    """Return the body of a block."""
    return b"b %d %d %d %d %d %d %X %d %d %d %d %b" % (
        block.index, block.tick, block.v_word, block.i_word, block.state, block.latched, block.inputs, block.missed,
        block.event, block.arc, block.pairs, pack_codes(block.codes, signs))


_U = rb"(0|[1-9]\d{0,9})"
_STATUS = rb"%b %b ([0-6]) ([01]) (0|[1-9A-F][0-9A-F]{0,7}) %b %b %b ([1-9]\d?)" % ((_U,) * 5)
_FIELDS = re.compile(_STATUS)
_LINE = re.compile(rb"b %b %b %b ([A-Za-z0-9+/]+={0,2})(?: [ -~]+)?" % (_U, _U, _STATUS))


@lru_cache(maxsize=256)
def _status(text: bytes) -> tuple[int, int, int, int, int, int, int, int, int] | None:
    """Return the nine fields between tick and base64, None where any of them is not as it must be.

    They are the same from block to block while nothing happens, so they are read once and known again by their text.
    """
    found = _FIELDS.fullmatch(text)
    if found is None:
        return None
    v_word, i_word, state, latched, inputs, missed, event, arc, pairs = found.groups()
    fields = (int(v_word), int(i_word), int(state), int(latched), int(inputs, 16), int(missed), int(event), int(arc),
              int(pairs))
    return None if (fields[5] | fields[6] | fields[7]) >> 32 or (fields[0] | fields[1]) >> 16 else fields


def decode_block(body: bytes, signs: str) -> Block:
    """Return the block of a body that begins with ``b`` and a space, or raise `WireFault`; written for speed."""
    parts = body.split(b" ", 3)
    if (len(parts) == 4 and parts[0] == b"b" and parts[1].isdigit() and parts[2].isdigit() and parts[1][0] != ZERO
            and parts[2][0] != ZERO):
        status, _, text = parts[3].rpartition(b" ")
        fields = _status(status)
        index, tick = int(parts[1]), int(parts[2])
        if fields is not None and not (index | tick) >> 32:
            try:
                packed = a2b_base64(text, strict_mode=True)
                block = Block(index, tick, *fields[:8], _UNPACK[signs, fields[8]].unpack(packed))
            except (Base64Error, struct.error, KeyError):
                raise WireFault(f"base64 of {fields[8]} pairs", f"{len(text)} characters", "block") from None
            block.packed = packed  # type: ignore[misc]
            return block
    return _decode_any(body, signs)


def _decode_any(body: bytes, signs: str) -> Block:
    """The same for every block: with options behind it, with zero counters, and for whatever is none."""
    found = _LINE.fullmatch(body)
    if found is None:
        raise WireFault("a block", repr(body[:40].decode("ascii", "replace")), "block")
    index, tick, v_word, i_word, state, latched, inputs, missed, event, arc, pairs, text = found.groups()
    block = Block(int(index), int(tick), int(v_word), int(i_word), int(state), int(latched), int(inputs, 16),
                  int(missed), int(event), int(arc), unpack_codes(text, signs, int(pairs)))
    if (block.index | block.tick | block.missed | block.event | block.arc) >> 32 or (block.v_word | block.i_word) >> 16:
        raise WireFault("32-bit counters and 16-bit words", repr(body[:40].decode("ascii")), "block")
    return block
