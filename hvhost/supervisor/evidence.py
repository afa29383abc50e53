"""Fetches a snapshot from the MCU part by part, and keeps it until someone has stored it safely.

The MCU keeps a snapshot until a session confirms that it was stored, so nothing here confirms by itself: the shell
writes what `take` hands out, and then commands ``stored``.
"""

from dataclasses import dataclass
from typing import TYPE_CHECKING

from hvhost.wire.frames import Ok, Refusal, Snap, unpack_codes
from hvhost.words.errors import CommandRefused, WireFault

if TYPE_CHECKING:
    from hvhost.supervisor.core import Core

PAIRS_MAX = 65_536  # more than any greeting may announce


@dataclass(frozen=True, slots=True, kw_only=True)
class Snapshot:
    """The samples around a trip or arc at the converter's full rate; codes are raw, (v, i) interleaved."""

    number: int
    kind: str  # 'arc' or 'trip'
    tag: int
    total: int
    trigger: int  # offset of the trigger's pair
    index: int  # sample index of pair 0
    lost: int
    codes: tuple[int, ...]


class Evidence:
    """One snapshot at a time, as the MCU holds one."""

    def __init__(self) -> None:
        self.ready: list[Snapshot] = []
        self.fetching = False  # from the first request until it is stored or given up
        self._number = 0
        self._codes: list[int] = []

    def forget(self) -> None:
        """A new session: what was being fetched is fetched anew from its first pair."""
        self._number, self._codes, self.fetching = 0, [], False
        self.ready.clear()

    def begin(self, core: "Core", number: int) -> None:
        """Ask for a snapshot from its first pair on."""
        if number == self._number:
            return
        self._number, self._codes, self.fetching = number, [], True
        self._ask(core)

    def part(self, core: "Core", answer: Ok | Refusal, now_s: float) -> None:
        """Take one answer; ask for the next part, or hand the whole on."""
        if isinstance(answer, Refusal):
            self.give_up(core, str(answer.code), now_s)
            return
        try:
            snapshot = self._read(core, answer)
        except (WireFault, ValueError) as error:
            self.give_up(core, f"malformed: {error}", now_s)
            return
        if snapshot is None:
            self._ask(core)
            return
        self.ready.append(snapshot)
        core.note(now_s, "snapshot", number=snapshot.number, kind=snapshot.kind, tag=snapshot.tag,
                  trigger=snapshot.trigger, index=snapshot.index, lost=snapshot.lost, codes=list(snapshot.codes))
        core.say(now_s, "note",
                 f"snapshot {snapshot.number} fetched: {snapshot.total} pairs around the {snapshot.kind}")

    def give_up(self, core: "Core", why: str, now_s: float) -> None:
        """It cannot be fetched in this session; the MCU keeps it."""
        core.say(now_s, "attention", f"snapshot {self._number} was not fetched: {why}; the MCU keeps it")
        self._number, self.fetching = 0, False

    def stored(self) -> None:
        """The shell has stored it (or never will): nothing waits for it any more."""
        self.fetching = False

    def take(self) -> list[Snapshot]:
        """Hand over the snapshots that wait to be stored."""
        ready, self.ready = self.ready, []
        return ready

    def _ask(self, core: "Core") -> None:
        if core.link is None:
            return
        try:
            core.link.request(Snap(offset=len(self._codes) // 2))
        except CommandRefused:
            self._number, self.fetching = 0, False

    def _read(self, core: "Core", answer: Ok) -> Snapshot | None:
        number, kind, tag, offset, total, trigger, index, lost, pairs, text = answer.words
        assert core.greeting is not None
        if int(number) != self._number or int(offset) * 2 != len(self._codes):
            raise WireFault(f"snapshot {self._number} from pair {len(self._codes) // 2}", f"{number} from {offset}")
        if not 0 < int(pairs) <= int(total) <= PAIRS_MAX:
            raise WireFault("pairs within the total", pairs)
        self._codes += unpack_codes(text.encode("ascii"), core.greeting.info.signs, int(pairs))
        if len(self._codes) < 2 * int(total):
            return None
        return Snapshot(number=int(number), kind=kind, tag=int(tag, 16), total=int(total), trigger=int(trigger),
                        index=int(index), lost=int(lost), codes=tuple(self._codes))
