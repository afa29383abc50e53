"""The MCU's EEPROM: settings, and what must outlive a reset; each of its two records carries a CRC-32.

The settings record is *blank* while it was never written and *damaged* when its CRC does not fit; either way there
are no settings in force.  A damaged state record is read as the worst that it could have said: the 'energised' mark
stands.
"""

import os
import struct
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Protocol
from zlib import crc32

from hvhost.wire.settings import SETTINGS, Settings
from hvhost.words.errors import UsageFault, WireFault

BLANK = 0xFF  # what an erased cell reads
U32 = 0xFFFFFFFF
_SETTINGS = struct.Struct(f"<{len(SETTINGS)}q")
_STATE = struct.Struct("<10I")
_CRC = struct.Struct("<I")
STATE_SIZE = _STATE.size + _CRC.size
SIZE = STATE_SIZE + _SETTINGS.size + _CRC.size


@dataclass(frozen=True, slots=True, kw_only=True)
class Kept:
    """What outlives a reset: the latch with its evidence, the mark, the run's tag, the boot counter, a pending
    snapshot's number (0: none)."""

    boots: int = 0
    causes: int = 0
    first: int = 0
    rule: int = 0
    tick: int = 0
    v_code: int = 0
    i_code: int = 0
    tag: int = 0
    mark: int = 0
    snapshot: int = 0


class Store(Protocol):
    """Where the cells live."""

    def load(self) -> bytes:
        """Return every cell, or nothing where there is no store yet."""

    def save(self, cells: bytes) -> None:
        """Keep every cell."""


class FileStore:
    """Cells in a file, replaced whole."""

    def __init__(self, path: Path) -> None:
        self._path = path

    def load(self) -> bytes:
        """Return the file's bytes, nothing where it is missing."""
        try:
            return self._path.read_bytes()
        except FileNotFoundError:
            return b""

    def save(self, cells: bytes) -> None:
        """Write beside, then rename: a kill leaves the old or the new cells."""
        beside = self._path.with_suffix(self._path.suffix + ".new")
        try:
            beside.write_bytes(cells)
            os.replace(beside, self._path)
        except OSError as refused:
            raise UsageFault(f"cannot write it: {refused.strerror}", where=str(self._path),
                             remedy="name another file") from None


class Eeprom:
    """The cells, read once and written through; ``settings`` is None when blank or damaged."""

    def __init__(self, settings: Settings | None = None, store: Store | None = None) -> None:
        self._store = store
        self.writes = 0
        self.cells = bytes([BLANK]) * SIZE
        if store is not None and (found := store.load()):
            self.cells = found[:SIZE].ljust(SIZE, bytes([BLANK]))
        self.kept = self._read_kept()
        self.settings = self._read_settings()
        if settings is not None and self.settings is None:
            self.write_settings(settings)

    @property
    def blank(self) -> bool:
        """True while no valid settings are held."""
        return self.settings is None

    def write_settings(self, settings: Settings) -> None:
        """Replace the settings whole."""
        record = _SETTINGS.pack(*settings.values)
        self._write(STATE_SIZE, record + _CRC.pack(crc32(record)))
        self.settings = settings

    def keep(self, **changes: int) -> None:
        """Change some of what is kept; nothing is written when nothing changes."""
        kept = replace(self.kept, **changes)
        if kept == self.kept:
            return
        record = _STATE.pack(*(getattr(kept, name) & U32 for name in Kept.__slots__))
        self._write(0, record + _CRC.pack(crc32(record)))
        self.kept = kept

    def damage(self, at: int, bit: int = 0) -> None:
        """Flip one bit of one cell (a fault) and read the cells anew, as a boot would."""
        cells = bytearray(self.cells)
        cells[at] ^= 1 << bit
        self._write(0, bytes(cells))
        self.kept, self.settings = self._read_kept(), self._read_settings()

    def erase(self) -> None:
        """Blank every cell (a fault, or a new chip)."""
        self._write(0, bytes([BLANK]) * SIZE)
        self.kept, self.settings = self._read_kept(), self._read_settings()

    def _write(self, at: int, data: bytes) -> None:
        self.cells = self.cells[:at] + data + self.cells[at + len(data) :]
        self.writes += 1
        if self._store is not None:
            self._store.save(self.cells)

    def _read_kept(self) -> Kept:
        record, crc = self.cells[: _STATE.size], self.cells[_STATE.size : STATE_SIZE]
        if set(record + crc) == {BLANK}:
            return Kept()
        if _CRC.unpack(crc)[0] != crc32(record):
            return Kept(mark=1)
        values = dict(zip(Kept.__slots__, _STATE.unpack(record), strict=True))
        for signed in ("v_code", "i_code"):
            values[signed] -= (values[signed] & 0x80000000) << 1
        return Kept(**values)

    def _read_settings(self) -> Settings | None:
        record, crc = self.cells[STATE_SIZE : SIZE - _CRC.size], self.cells[SIZE - _CRC.size :]
        if _CRC.unpack(crc)[0] != crc32(record):
            return None
        try:
            return Settings(_SETTINGS.unpack(record))
        except WireFault:
            return None
