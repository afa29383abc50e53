"""The guard: every rule over every block, in order, with their memories; the second line after the MCU's own rules.

It decides in integers and in a fixed order and knows no clock, so the same blocks, turns and limits give the same
verdicts again.  A state number that is not known is judged by every rule.
"""

from dataclasses import dataclass, replace
from typing import Any

from hvhost.guard.amplitude import Run
from hvhost.guard.collapse import Fallen, ended, follow_fall, history_needed
from hvhost.guard.limits import GuardLimits
from hvhost.guard.quiet import ASKED, ASKED_ALWAYS, at_rest, band_of, quiet
from hvhost.guard.rules import EVERY, LIVE, RULES, SLOT, WORDS_OUT
from hvhost.guard.stream import POWERED
from hvhost.guard.verdicts import Severity, Verdict
from hvhost.guard.view import View
from hvhost.samples.blocks import SampleBlock
from hvhost.wire.vocabulary import EventKind, HostRule, McuState

TURNS_MAX = 16  # announced changes of state that wait for their block
STATE_AFTER: dict[str, McuState] = {
    EventKind.WARNING: McuState.WARNING, EventKind.ENERGISED: McuState.ENERGISED, EventKind.CUT: McuState.OFF,
    EventKind.LOWERING: McuState.LOWERING, EventKind.PAUSING: McuState.PAUSING, EventKind.RESUMED: McuState.ENERGISED}
_FALLS = frozenset(int(state) for state in WORDS_OUT)
_POWERED = frozenset(int(state) for state in POWERED)


@dataclass(frozen=True, slots=True, kw_only=True)
class GuardState:
    """Everything that a guard carries from block to block; a guard made from it goes on alike."""

    limits: GuardLimits
    memories: tuple[Any, ...]
    fallen: Fallen
    before: tuple[View, ...]
    state: int
    turns: tuple[tuple[int, int], ...]
    last_index: int
    last_tick: int
    arrival_s: float | None
    silent: bool


class Guard:
    """Judges sample blocks; ``judge`` is called for every block, in any state, before anything else sees it."""

    __slots__ = ("_arrival_s", "_band", "_before", "_fallen", "_last_index", "_last_tick", "_memories", "_needed",
                 "_resting", "_silent", "_state", "_turns", "limits")

    def __init__(self, limits: GuardLimits) -> None:
        self._memories: list[Any] = [rule.fresh for rule in RULES]
        self._fallen = Fallen(since=0)
        self._before: tuple[View, ...] = ()
        self._state = int(McuState.OFF)
        self._turns: tuple[tuple[int, int], ...] = ()
        self._last_index = self._last_tick = 0
        self._arrival_s: float | None = None
        self._silent = False
        self.with_limits(limits)

    def with_limits(self, limits: GuardLimits) -> None:
        """Judge by these limits from the next block on; what was counted so far stays counted."""
        self.limits = limits
        self._band = band_of(limits)
        self._resting = False  # until every rule has judged a block by these limits
        self._needed = history_needed(limits)

    def heard(self, kind: str, tick: int) -> None:
        """Note a change of state that the MCU announced; the samples from this (unwrapped) tick on are judged by it.

        Blocks tell the state at their first sample only.  A turn is used in the one block that holds its tick: every
        block's own state stands from its first sample.
        """
        after = STATE_AFTER.get(kind)
        if after is not None:
            self._turns = (*self._turns[1 - TURNS_MAX:], (tick, int(after)))

    def judge(self, block: SampleBlock) -> tuple[Verdict, ...]:
        """Return the verdicts on one block, in the order of the rules."""
        self._arrival_s = block.arrival_s
        self._silent = False
        if self._turns:
            return self._judge_parts(block)
        return self._judge(block, block.state)

    def check_time(self, now_s: float) -> tuple[Verdict, ...]:
        """Judge the silence at this monotonic time: the stream is stale when no block came for ``stale_ms``."""
        due = self.stale_at()
        if due is None or now_s < due or self._silent or self._arrival_s is None:
            return ()
        self._silent = True
        silence_ms = round((now_s - self._arrival_s) * 1e3)
        severity = Severity.TRIP if self._state in _POWERED or self._state not in LIVE else Severity.EVENT
        return (Verdict(rule=HostRule.STALE, severity=severity, limit=self.limits.stale_ms, measured=silence_ms,
                        index=self._last_index, tick=self._last_tick, text=f"no samples for {silence_ms} ms"),)

    def stale_at(self) -> float | None:
        """Return the monotonic time at which silence becomes a verdict; None before the first block and after it."""
        if self._arrival_s is None or self._silent:
            return None
        return self._arrival_s + self.limits.stale_ms * 1e-3

    @property
    def interfering(self) -> dict[HostRule, int]:
        """Excursions of fewer than n samples since the guard was made, for each rule that saw any."""
        counts = {rule.number: self._memories[at].odd for at, rule in enumerate(RULES) if isinstance(rule.fresh, Run)}
        counts[HostRule.BREAKDOWN] = self._fallen.odd
        return {rule: count for rule, count in counts.items() if count}

    def arc_energy_j(self) -> float:
        """Return the energy that the arcs of the present step have taken, in joules."""
        spent = self._memories[SLOT[HostRule.ARC_ENERGY]]
        return self.limits.joules(spent.total - spent.earlier)

    def snapshot(self) -> GuardState:
        """Return the whole state."""
        return GuardState(limits=self.limits, memories=tuple(self._memories), fallen=self._fallen,
                          before=self._before, state=self._state, turns=self._turns, last_index=self._last_index,
                          last_tick=self._last_tick, arrival_s=self._arrival_s, silent=self._silent)

    @classmethod
    def from_snapshot(cls, state: GuardState) -> "Guard":
        """Return a guard that goes on from this state."""
        guard = cls(state.limits)
        guard._memories, guard._fallen, guard._before = list(state.memories), state.fallen, state.before
        guard._state, guard._turns, guard._silent = state.state, state.turns, state.silent
        guard._last_index, guard._last_tick, guard._arrival_s = state.last_index, state.last_tick, state.arrival_s
        return guard

    def _judge(self, block: SampleBlock, state: int) -> tuple[Verdict, ...]:
        view = View(block, state, self._before)
        if state != self._state:
            self._enter(state, block.index)
        limits, memories = self.limits, self._memories
        found: tuple[Verdict, ...] = ()
        if state in _FALLS or state not in LIVE:
            self._fallen, view.collapse = follow_fall(view, limits, self._fallen)
        spared = self._resting and quiet(view, self._band)
        for at, rule in ASKED.get(state, ASKED_ALWAYS) if spared else LIVE.get(state, EVERY):
            memories[at], verdict = rule(view, limits, memories[at])
            if verdict is not None:
                found += (verdict,)
        if not spared:
            self._resting = at_rest(memories)
        self._remember(view)
        return found

    def _enter(self, state: int, index: int) -> None:
        """Start afresh the memories of rules that are not live in the new state."""
        self._resting = False
        live = {at for at, _ in LIVE.get(state, EVERY)}
        for at, rule in enumerate(RULES):
            if at not in live and not rule.lasting:
                memory = self._memories[at]
                self._memories[at] = Run(odd=memory.odd) if isinstance(memory, Run) else rule.fresh
        falls = state in _FALLS or state not in LIVE
        fell = self._state in _FALLS or self._state not in LIVE
        if falls and not fell:
            self._fallen = ended(self._fallen, self.limits, since=index)
        self._state = state

    def _remember(self, view: View) -> None:
        """Keep as many blocks as the collapse rule may look back on, and no more."""
        before = (view,) if len(view.v) >= self._needed else self._trimmed(view)
        view.before = ()
        view.collapse = None
        self._before = before
        behind_first = len(view.v) - 1
        self._last_index = view.index + behind_first
        self._last_tick = view.block.tick + behind_first * view.block.sample_ticks

    def _trimmed(self, view: View) -> tuple[View, ...]:
        kept, pairs = [view], len(view.v)
        for earlier in reversed(view.before):
            if pairs >= self._needed:
                break
            kept.append(earlier)
            pairs += len(earlier.v)
        return tuple(reversed(kept))

    def _judge_parts(self, block: SampleBlock) -> tuple[Verdict, ...]:
        """Judge a block in which changes of state were announced, part by part."""
        end = block.tick + len(block.v) * block.sample_ticks
        turns = sorted(turn for turn in self._turns if block.tick < turn[0] < end)
        self._turns = tuple(turn for turn in self._turns if turn[0] >= end)
        found: tuple[Verdict, ...] = ()
        state, begin = block.state, 0
        for tick, after in turns:
            at = -((block.tick - tick) // block.sample_ticks)  # the first sample at or after the tick
            if begin < at < len(block.v):
                found += self._judge(_part(block, begin, at), state)
                begin = at
            state = after
        return found + self._judge(_part(block, begin, len(block.v)) if begin else block, state)


def _part(block: SampleBlock, begin: int, end: int) -> SampleBlock:
    """Return the samples from ``begin`` to before ``end`` as a block of their own."""
    return replace(block, index=block.index + begin, tick=block.tick + begin * block.sample_ticks,
                   v=block.v[begin:end], i=block.i[begin:end], gap=block.gap if begin == 0 else 0)
