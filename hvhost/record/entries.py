"""What a run's block file holds: one class per kind of entry, and the damage that a reader reports.

Every input of the core is here with the time at which the core was given it, so that a run can be judged again.
``t_s`` and ``arrival_s`` are host monotonic seconds, ``utc_ns`` is UTC in nanoseconds.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from enum import IntEnum, StrEnum
from typing import Any

from hvhost.supervisor.runs import Outcome as Outcome  # how a run ended is the supervisor's word
from hvhost.wire.frames import Block
from hvhost.words.values import swift

Json = Mapping[str, Any]


class EntryKind(IntEnum):
    """The number of each kind of entry in the file."""

    META = 1
    BLOCK = 2
    LINE = 3
    SENT = 4
    COMMAND = 5
    TIMER = 6
    NOTE = 7
    ANCHOR = 8
    GARBLED = 9
    LOST = 10
    END = 11


@dataclass(frozen=True, slots=True)
class MetaEntry:
    """The first entry: everything that was fixed before the run (see FORMAT.md, section 4)."""

    data: Json


@dataclass(frozen=True, slots=True)
class BlockEntry:
    """A block of sample pairs as the MCU sent it."""

    arrival_s: float
    block: Block


@dataclass(frozen=True, slots=True)
class LineEntry:
    """The body of any other line received: an answer or an event."""

    arrival_s: float
    body: bytes


@swift
class SentEntry:
    """A whole line sent to the MCU, its trailer and LF included."""

    t_s: float
    line: bytes


@dataclass(frozen=True, slots=True)
class CommandEntry:
    """A command that the core was given: who asked for what."""

    t_s: float
    data: Json


@dataclass(frozen=True, slots=True)
class TimerEntry:
    """The core was stepped at this time without any other input."""

    t_s: float


@dataclass(frozen=True, slots=True)
class NoteEntry:
    """What the host concluded or did: verdicts, actions, states, steps (see FORMAT.md, section 5)."""

    utc_ns: int
    data: Json


@dataclass(frozen=True, slots=True)
class AnchorEntry:
    """One point of the time base: this unwrapped tick is this host time and this UTC."""

    tick: int
    mono_s: float
    utc_ns: int


@dataclass(frozen=True, slots=True)
class GarbledEntry:
    """A received line that was dropped: why, and how many bytes went with it."""

    arrival_s: float
    reason: str
    size: int


@dataclass(frozen=True, slots=True)
class LostEntry:
    """The recorder could not keep this many entries at this place."""

    count: int


@dataclass(frozen=True, slots=True)
class EndEntry:
    """The last entry of a run that was closed: outcome, reason and counts."""

    data: Json


Content = (MetaEntry | BlockEntry | LineEntry | SentEntry | CommandEntry | TimerEntry | NoteEntry | AnchorEntry
           | GarbledEntry | LostEntry | EndEntry)


@dataclass(frozen=True, slots=True)
class Entry:
    """One whole and proven entry: where it stands in the file, its sequence number and what it holds."""

    offset: int
    size: int
    seq: int
    kind: EntryKind
    content: Content


class DamageKind(StrEnum):
    """What is wrong at a place of the file."""

    TORN = "torn"  # the file ends inside an entry
    ZEROED = "zero-filled"  # a stretch of zero bytes that belongs to no entry
    BROKEN = "broken"  # bytes that are no whole entry: changed, or of another file
    MISSING = "missing"  # sequence numbers were passed over
    REPEATED = "repeated"  # an entry with a sequence number that was read before
    UNKNOWN = "unknown kind"  # whole, but of a kind that this reader does not know


@dataclass(frozen=True, slots=True)
class Damage:
    """A stretch of the file that gave no entry (``size`` bytes) or sequence numbers that are absent (``entries``)."""

    offset: int
    size: int
    kind: DamageKind
    entries: int
    text: str
