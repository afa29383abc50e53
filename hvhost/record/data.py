"""A run read back for measures, reports and exports: numpy arrays of codes and the notes around them.

Indices and ticks are unwrapped from the first block of the run; what a note or an event says modulo 2**32 (or 2**31)
is found again by `RunData.row_of`.  Blocks that repeat or go backwards are left out and counted, as the core does.
"""

import json
from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hvhost.record.blockfile import Buffer, entry_of, open_buffer, scan
from hvhost.record.entries import (
    AnchorEntry,
    CommandEntry,
    Damage,
    DamageKind,
    EndEntry,
    Entry,
    EntryKind,
    GarbledEntry,
    Json,
    LineEntry,
    LostEntry,
    MetaEntry,
    NoteEntry,
)
from hvhost.record.folder import META, RunFolder
from hvhost.record.layout import AS_TEXT
from hvhost.record.meta import RunMeta
from hvhost.record.spans import Blocks, Span, decode_spans
from hvhost.wire.frames import McuEvent, decode_received
from hvhost.words.errors import RecordFault, WireFault

U32 = 0xFFFFFFFF
WRAP = 1 << 32
Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Mask = NDArray[np.bool_]
SKIPPED = frozenset({EntryKind.SENT, EntryKind.TIMER})


@dataclass(frozen=True, slots=True)
class Gap:
    """Samples that are absent: the row before which, and how many."""

    row: int
    missing: int


@dataclass(slots=True)
class Read:
    """What one pass over a block file finds besides the samples."""

    meta: Json | None = None
    end: Json | None = None
    notes: list[Json] = field(default_factory=list)
    events: list[McuEvent] = field(default_factory=list)
    commands: list[CommandEntry] = field(default_factory=list)
    anchors: list[AnchorEntry] = field(default_factory=list)
    damage: list[Damage] = field(default_factory=list)
    garbled: int = 0
    lost: int = 0

    def take(self, entry: Entry) -> None:
        """Sort one entry in."""
        content = entry.content
        if isinstance(content, MetaEntry):
            self.meta = self.meta or content.data
        elif isinstance(content, NoteEntry):
            self.notes.append({"utc_ns": content.utc_ns, **content.data})
        elif isinstance(content, LineEntry):
            self._line(content.body)
        elif isinstance(content, AnchorEntry):
            self.anchors.append(content)
        elif isinstance(content, CommandEntry):
            self.commands.append(content)
        elif isinstance(content, GarbledEntry):
            self.garbled += 1
        elif isinstance(content, LostEntry):
            self.lost += content.count
        elif isinstance(content, EndEntry):
            self.end = content.data

    def _line(self, body: bytes) -> None:
        try:
            frame = decode_received(body, "uu")
        except (WireFault, ValueError):
            return
        if isinstance(frame, McuEvent) and all(frame.number != known.number for known in self.events[-16:]):
            self.events.append(frame)


class RunData:
    """One run in memory; ``rows`` samples, each a pair of raw codes with the head of its block."""

    def __init__(self, found: Read, blocks: Blocks, meta: RunMeta, folder: RunFolder | None = None) -> None:
        self.meta = meta
        self.folder = folder
        self.notes: tuple[Json, ...] = tuple(found.notes)
        self.events: tuple[McuEvent, ...] = tuple(found.events)
        self.commands: tuple[CommandEntry, ...] = tuple(found.commands)
        self.anchors: tuple[AnchorEntry, ...] = tuple(found.anchors)
        self.damage: tuple[Damage, ...] = tuple(found.damage)
        self.garbled, self.lost, self.end = found.garbled, found.lost, found.end
        keep, index = _ahead(blocks)
        self.repeated_blocks = int(len(keep) - keep.sum())
        self.head = blocks.head[keep]
        self.block_index = index[keep]
        self.block_tick = _unwrapped(self.head["tick"])
        rows = np.repeat(keep, blocks.head["pairs"])
        self.v_code, self.i_code = blocks.v[rows], blocks.i[rows]
        self.first = np.zeros(len(self.head) + 1, dtype=np.int64)
        np.cumsum(self.head["pairs"], out=self.first[1:], dtype=np.int64)

    @property
    def rows(self) -> int:
        """How many samples there are."""
        return len(self.v_code)

    def blocks_of(self, a: int = 0, b: int | None = None) -> Ints:
        """The number of the block that each of the rows a to b belongs to."""
        a, b = self._range(a, b)
        if a >= b:
            return np.zeros(0, dtype=np.int64)
        low, high = np.searchsorted(self.first, (a, b - 1), side="right") - 1
        numbers = np.repeat(np.arange(low, high + 1), self.head["pairs"][low : high + 1])
        return np.asarray(numbers[a - self.first[low] : b - self.first[low]])

    def _range(self, a: int, b: int | None) -> tuple[int, int]:
        return max(0, a), min(self.rows, self.rows if b is None else b)

    def index(self, a: int = 0, b: int | None = None) -> Ints:
        """Unwrapped sample index of the rows a to b."""
        return self._along(self.block_index, 1, a, b)

    def tick(self, a: int = 0, b: int | None = None) -> Ints:
        """Unwrapped tick of the rows a to b."""
        return self._along(self.block_tick, self.meta.sample_ticks, a, b)

    def _along(self, starts: Ints, step: int, a: int, b: int | None) -> Ints:
        a, b = self._range(a, b)
        block = self.blocks_of(a, b)
        return np.asarray(starts[block] + (np.arange(a, a + len(block)) - self.first[block]) * step)

    def of_rows(self, name: str, a: int = 0, b: int | None = None) -> NDArray[np.generic]:
        """Return a head field ('state', 'v_word', ...) for the rows a to b."""
        return np.asarray(self.head[name][self.blocks_of(a, b)])

    def volts(self, a: int = 0, b: int | None = None) -> Floats:
        """Oriented volts of the rows a to b."""
        return self.meta.voltage.values(self.v_code[slice(*self._range(a, b))])

    def amps(self, a: int = 0, b: int | None = None) -> Floats:
        """Oriented amps of the rows a to b."""
        return self.meta.current.values(self.i_code[slice(*self._range(a, b))])

    def usable(self, a: int = 0, b: int | None = None) -> Mask:
        """Whether both codes of the rows a to b are off the converters' limits."""
        rows = slice(*self._range(a, b))
        return self.meta.voltage.off_limits(self.v_code[rows]) & self.meta.current.off_limits(self.i_code[rows])

    def seconds(self, a: int = 0, b: int | None = None) -> Floats:
        """MCU time of the rows a to b in seconds since the run's first row."""
        origin = int(self.block_tick[0]) if self.rows else 0
        return np.asarray((self.tick(a, b) - origin) / self.meta.tick_hz)

    @cached_property
    def gaps(self) -> tuple[Gap, ...]:
        """Where samples are absent between two blocks."""
        if len(self.head) < 2:
            return ()
        missing = np.diff(self.block_index) - self.head["pairs"][:-1]
        return tuple(Gap(int(self.first[at + 1]), int(missing[at])) for at in np.flatnonzero(missing))

    @property
    def missing(self) -> int:
        """How many samples are absent."""
        return sum(gap.missing for gap in self.gaps)

    def row_of(self, index: int, bits: int = 32) -> int:
        """Return the first row at or after a sample index known modulo 2**bits; ``rows`` where it lies beyond.

        An index before the first row gives row 0.
        """
        return self._row(self.block_index, index, 1 << bits, 1)

    def row_of_tick(self, tick: int) -> int:
        """Return the first row at or after a tick known modulo 2**32."""
        return self._row(self.block_tick, tick, WRAP, self.meta.sample_ticks)

    def _row(self, starts: Ints, at: int, span: int, step: int) -> int:
        if not self.rows:
            return 0
        ahead = (at - int(starts[0])) % span
        if ahead >= span >> 1:
            return 0
        block = int(np.searchsorted(starts, int(starts[0]) + ahead, side="right")) - 1
        within = -(-(int(starts[0]) + ahead - int(starts[block])) // step)
        return int(self.first[block]) + min(within, int(self.head["pairs"][block]))

    def seconds_of_tick(self, tick: int) -> float:
        """Return MCU seconds since the first row of a tick known modulo 2**32 (negative before it)."""
        ahead = (tick - int(self.block_tick[0])) & U32 if self.rows else 0
        return (ahead - WRAP if ahead >= WRAP >> 1 else ahead) / self.meta.tick_hz

    def utc_ns(self, ticks: Ints) -> Ints:
        """Return the UTC of unwrapped ticks: host time by the anchors, UTC as it stood when the run was opened."""
        at, mono = self._time_points()
        slope = 1.0 / self.meta.tick_hz
        host = np.interp(ticks, at, mono) if len(at) > 1 else mono[0] + (ticks - at[0]) * slope
        host = np.where(ticks < at[0], mono[0] + (ticks - at[0]) * slope, host)
        host = np.where(ticks > at[-1], mono[-1] + (ticks - at[-1]) * slope, host)
        return np.asarray(self.meta.opened_utc_ns + np.rint((host - self.meta.opened_mono_s) * 1e9).astype(np.int64))

    def _time_points(self) -> tuple[Ints, Floats]:
        """Return (ticks, host seconds) of the time base, rising; without anchors, the earliest arrival's line."""
        if not self.rows:
            return np.zeros(1, dtype=np.int64), np.array([self.meta.opened_mono_s])
        base = int(self.block_tick[0])
        points = sorted({base + _signed32(a.tick - base): a.mono_s for a in self.anchors}.items())
        if points:
            return np.array([p[0] for p in points], dtype=np.int64), np.array([p[1] for p in points])
        last = self.block_tick + (self.head["pairs"].astype(np.int64) - 1) * self.meta.sample_ticks
        delay = self.head["arrival"] - (last - base) / self.meta.tick_hz
        return np.array([base], dtype=np.int64), np.array([float(delay.min())])

    def notes_of(self, what: str) -> Iterator[Json]:
        """Yield the notes of one kind in order."""
        return (n for n in self.notes if n.get("what") == what)


def _signed32(difference: int) -> int:
    """Return a difference modulo 2**32 as the nearest signed number."""
    return (difference + (1 << 31)) % WRAP - (1 << 31)


def _unwrapped(counts: NDArray[np.generic]) -> Ints:
    """Unwrap 32-bit counts that step by less than 2**31."""
    wide = counts.astype(np.int64)
    if len(wide) < 2:
        return wide
    steps = (np.diff(wide) + (1 << 31)) % WRAP - (1 << 31)
    return np.concatenate((wide[:1], wide[0] + np.cumsum(steps)))


def _ahead(blocks: Blocks) -> tuple[Mask, Ints]:
    """Return which blocks begin at or after the end of all before them, and every block's unwrapped index."""
    index = _unwrapped(blocks.head["index"])
    end = index + blocks.head["pairs"]
    before = np.concatenate((index[:1], np.maximum.accumulate(end)[:-1])) if len(index) else index
    return np.asarray((index >= before) & (blocks.head["pairs"] > 0)), index


def read_all(buffer: Buffer) -> tuple[Read, Blocks]:
    """Read a block file once: everything but the sent lines and timer steps."""
    found, spans = Read(), []
    for raw in scan(buffer):
        if isinstance(raw, Damage):
            found.damage.append(raw)
        elif raw.kind == EntryKind.BLOCK and not raw.flags & AS_TEXT:
            spans.append(Span(raw.flags, raw.start, raw.end))
        elif raw.kind not in SKIPPED:
            entry = entry_of(buffer, raw)
            if isinstance(entry, Damage):
                found.damage.append(entry)
            elif entry.kind is EntryKind.BLOCK:
                found.damage.append(Damage(entry.offset, entry.size, DamageKind.BROKEN, 1,
                                           "a block with numbers that the protocol does not allow"))
            else:
                found.take(entry)
    return found, decode_spans(buffer, spans)


def load_run(folder: RunFolder) -> RunData:
    """Read a run; raises `RecordFault` where neither the block file nor ``meta.json`` says what the codes mean."""
    try:
        found, blocks = read_all(open_buffer(folder.blocks) if folder.blocks.exists() else b"")
    except ValueError as error:
        raise RecordFault("blocks as FORMAT.md describes them", str(error), str(folder.blocks)) from None
    meta = found.meta or _side_meta(folder.path / META)
    if meta is None:
        raise RecordFault("a META entry or meta.json", "neither can be read", str(folder.path))
    return RunData(found, blocks, RunMeta.of(meta), folder)


def _side_meta(path: Path) -> Json | None:
    try:
        data = json.loads(path.read_bytes())
    except (OSError, ValueError):
        return None
    return data if isinstance(data, dict) else None
