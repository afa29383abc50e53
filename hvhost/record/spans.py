"""Many BLOCK payloads at once: from their places in a block file to numpy arrays, live and packed forms alike."""

from collections import defaultdict
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hvhost.record.blockfile import Buffer
from hvhost.record.layout import FIXED_SIZE, I_SIGNED, PACKED, V_SIGNED
from hvhost.record.pack import FRAME

CHUNK = 8_192  # blocks decoded at a time: bounds the memory that bits need
FLAGS = V_SIGNED | I_SIGNED | PACKED

_HEAD = [("arrival", "<f8"), ("index", "<u4"), ("tick", "<u4"), ("v_word", "<u2"), ("i_word", "<u2"), ("state", "u1"),
         ("latched", "u1"), ("inputs", "<u2")]
LIVE = np.dtype([*_HEAD, ("missed", "<u4"), ("event", "<u4"), ("arc", "<u4"), ("pairs", "u1")])
REST = np.dtype([*_HEAD, ("missed", "<u2"), ("event", "<u2"), ("arc", "<u2"), ("pairs", "u1"),
                 ("v_low", "<i4"), ("v_bits", "u1"), ("i_low", "<i4"), ("i_bits", "u1")])
assert LIVE.itemsize == FIXED_SIZE
assert REST.itemsize == FRAME.size

Codes = NDArray[np.int32]


@dataclass(frozen=True, slots=True)
class Span:
    """Where the payload of one BLOCK stands."""

    flags: int
    start: int
    end: int


@dataclass(frozen=True, slots=True)
class Blocks:
    """All blocks in file order: ``head`` has one `LIVE` record per block, ``first`` the row at which each begins."""

    head: NDArray[np.void]
    first: NDArray[np.int64]
    v: Codes
    i: Codes


def decode_spans(buffer: Buffer, spans: list[Span]) -> Blocks:
    """Return head and codes of every span; raises ``ValueError`` where a payload does not fit its form."""
    bytes_ = np.frombuffer(buffer, dtype=np.uint8) if len(buffer) else np.zeros(0, dtype=np.uint8)
    head = np.zeros(len(spans), dtype=LIVE)
    classes: dict[tuple[int, int], list[int]] = defaultdict(list)
    for at, span in enumerate(spans):
        classes[span.flags & FLAGS, span.end - span.start].append(at)
    parts: list[tuple[NDArray[np.int64], Codes, Codes]] = []
    for (flags, size), members in classes.items():
        for low in range(0, len(members), CHUNK):
            chosen = np.array(members[low : low + CHUNK], dtype=np.int64)
            starts = np.array([spans[at].start for at in chosen], dtype=np.int64)
            rows = bytes_[starts[:, None] + np.arange(size)]
            parts += _rest(rows, chosen, head) if flags & PACKED else _live(rows, chosen, head, flags)
    first = np.zeros(len(spans) + 1, dtype=np.int64)
    np.cumsum(head["pairs"], out=first[1:], dtype=np.int64)
    v, i = np.zeros(first[-1], dtype=np.int32), np.zeros(first[-1], dtype=np.int32)
    for chosen, v_codes, i_codes in parts:
        at_rows = first[chosen][:, None] + np.arange(v_codes.shape[1])
        v[at_rows], i[at_rows] = v_codes, i_codes
    return Blocks(head, first, v, i)


def _live(rows: NDArray[np.uint8], chosen: NDArray[np.int64], head: NDArray[np.void],
          flags: int) -> list[tuple[NDArray[np.int64], Codes, Codes]]:
    head[chosen] = np.ascontiguousarray(rows[:, :FIXED_SIZE]).view(LIVE)[:, 0]
    pairs, odd = divmod(rows.shape[1] - FIXED_SIZE, 4)
    if odd or (head["pairs"][chosen] != pairs).any():
        raise ValueError("a BLOCK's size does not fit its pairs")
    if pairs == 0:
        return []
    raw = np.ascontiguousarray(rows[:, FIXED_SIZE:])
    v = raw.view("<i2" if flags & V_SIGNED else "<u2")[:, 0::2].astype(np.int32)
    i = raw.view("<i2" if flags & I_SIGNED else "<u2")[:, 1::2].astype(np.int32)
    return [(chosen, v, i)]


def _rest(rows: NDArray[np.uint8], chosen: NDArray[np.int64],
          head: NDArray[np.void]) -> list[tuple[NDArray[np.int64], Codes, Codes]]:
    frame = np.ascontiguousarray(rows[:, : REST.itemsize]).view(REST)[:, 0]
    for name in LIVE.names or ():
        head[name][chosen] = frame[name]
    stream = rows[:, REST.itemsize :]
    key = (frame["pairs"].astype(np.int64) << 16) | (frame["v_bits"].astype(np.int64) << 8) | frame["i_bits"]
    out = []
    for each in np.unique(key):
        members = np.flatnonzero(key == each)
        pairs, v_bits, i_bits = int(each) >> 16, int(each) >> 8 & 0xFF, int(each) & 0xFF
        if stream.shape[1] != (pairs * (v_bits + i_bits) + 7) >> 3 or max(v_bits, i_bits) > 16:
            raise ValueError("a packed BLOCK's size does not fit its pairs and bits")
        bits = np.unpackbits(stream[members], axis=1)
        v = _whole(bits[:, : pairs * v_bits], pairs, v_bits) + frame["v_low"][members][:, None]
        i = _whole(bits[:, pairs * v_bits : pairs * (v_bits + i_bits)], pairs, i_bits)
        out.append((chosen[members], v, i + frame["i_low"][members][:, None]))
    return out


def _whole(bits: NDArray[np.uint8], pairs: int, width: int) -> Codes:
    """Join bits, most significant first, to one integer per pair."""
    codes = np.zeros((bits.shape[0], pairs), dtype=np.int32)
    planes = bits.reshape(bits.shape[0], pairs, width)
    for k in range(width):
        codes = (codes << 1) | planes[:, :, k]
    return codes
