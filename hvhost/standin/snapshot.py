"""The snapshot: pairs before and after a trip or an arc at the full rate, kept until a session has stored them.

A latching cause may overwrite an unconfirmed arc's snapshot, an arc overwrites nothing, and neither overwrites a
trip's; whatever is lost is told by an event.  A missed conversion ends the pairs on its side of the trigger, so that
a snapshot's indices have no gap.
"""

from collections import deque
from dataclasses import dataclass, field

from hvhost.standin.core import U32, Core
from hvhost.wire.frames import SNAP_PAIRS, pack_codes
from hvhost.wire.vocabulary import EventKind

OVERWRITTEN, NOT_TAKEN, BY_RESET = 1, 2, 3


@dataclass(slots=True, kw_only=True)
class Shot:
    """One snapshot: pairs of raw codes, where its trigger lies among them, the unwrapped index of its first."""

    id: int
    kind: str  # 'arc' or 'trip'
    tag: int
    trigger: int
    first: int
    left: int  # pairs still to come
    lost: int = 0
    pairs: list[tuple[int, int]] = field(default_factory=list)


class Snapshot:
    """The ring of the last pairs and the one snapshot held."""

    def __init__(self, core: Core) -> None:
        self.core = core
        self.ring: deque[tuple[int, int]] = deque(maxlen=core.config.before)
        self.shot: Shot | None = None
        self.collecting = False
        self._count = 0

    def boot(self) -> None:
        """After a reset: what was pending is lost, and said to be."""
        self.ring.clear()
        self.shot, self.collecting = None, False
        lost = self.core.eeprom.kept.snapshot
        if lost:
            self.core.event(EventKind.LOST, lost, BY_RESET)
            self.core.eeprom.keep(snapshot=0)

    @property
    def waiting(self) -> int:
        """The complete snapshot's number, 0 where none waits."""
        return self.shot.id if self.shot and not self.collecting else 0

    def trigger(self, kind: str) -> None:
        """Begin a snapshot whose trigger is the last sample; see the module's text for what may be overwritten."""
        core, shot = self.core, self.shot
        if shot and self.collecting and kind == "trip":
            shot.kind = kind  # the same evidence: its window is still open
            return
        lost = 0
        if shot and (kind == "arc" or shot.kind == "trip"):
            shot.lost = NOT_TAKEN
            core.event(EventKind.LOST, self._next_id(), NOT_TAKEN)
            return
        if shot:
            lost = OVERWRITTEN
            core.event(EventKind.LOST, shot.id, OVERWRITTEN)
        pairs = list(self.ring)
        self.shot = Shot(id=self._next_id(), kind=kind, tag=core.tag or core.eeprom.kept.tag,
                         trigger=max(0, len(pairs) - 1), first=core.index - len(pairs) + 1, left=core.config.after,
                         lost=lost, pairs=pairs)
        self.collecting = True
        core.eeprom.keep(snapshot=self.shot.id)

    def _next_id(self) -> int:
        self._count += 1
        return (self.core.eeprom.kept.boots & 0x7FFF) << 16 | self._count & 0xFFFF

    def add(self, pair: tuple[int, int]) -> None:
        """Take one pair behind the trigger."""
        shot = self.shot
        if shot is None:
            raise AssertionError("collecting without a snapshot")
        shot.pairs.append(pair)
        shot.left -= 1
        if shot.left <= 0:
            self._complete()

    def missed(self) -> None:
        """A conversion is missing: nothing across it belongs together."""
        self.ring.clear()
        if self.collecting:
            self._complete()

    def _complete(self) -> None:
        self.collecting = False
        if self.shot:
            self.core.event(EventKind.SNAPSHOT, self.shot.id, len(self.shot.pairs))

    def part(self, offset: int) -> str | None:
        """The answer's fields for the part that begins at this pair; None where no snapshot waits or it ends before."""
        shot = self.shot
        if shot is None or self.collecting or offset >= len(shot.pairs):
            return None
        part = shot.pairs[offset : offset + SNAP_PAIRS]
        text = pack_codes(tuple(code for pair in part for code in pair), self.core.config.signs).decode("ascii")
        return (f"{shot.id} {shot.kind} {shot.tag:08X} {offset} {len(shot.pairs)} {shot.trigger} {shot.first & U32} "
                f"{shot.lost} {len(part)} {text}")

    def stored(self, number: int) -> bool:
        """The host has stored it: forget it; False where it is another one."""
        if not self.waiting or number != self.waiting:
            return False
        self.shot = None
        self.core.eeprom.keep(snapshot=0)
        return True
