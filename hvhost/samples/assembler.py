"""The assembler: the wire's blocks in, sample blocks out; unwraps, marks gaps, refuses what was seen before."""

from dataclasses import dataclass

from hvhost.samples.blocks import Flags, Orientation, SampleBlock
from hvhost.samples.timebase import HALF, WRAP, TickClock
from hvhost.wire.frames import Block

STALE_S = 0.5  # lateness from which a block is stale, where the lease is not told
_LIMIT_V, _LIMIT_I = int(Flags.LIMIT_V), int(Flags.LIMIT_I)  # plain: IntFlag arithmetic costs a microsecond
_REVERSED_V, _REVERSED_I = int(Flags.REVERSED_V), int(Flags.REVERSED_I)
_NONE = Flags(0)


@dataclass(slots=True, kw_only=True)
class Counters:
    """What the assembler counted since it was made."""

    blocks: int = 0
    pairs: int = 0
    gaps: int = 0
    lost: int = 0  # pairs of the gaps that were converted but never arrived
    missed: int = 0  # conversions that the MCU says it missed
    repeated: int = 0  # blocks that begin with a sample seen before: refused
    backward: int = 0  # blocks that lie wholly before the last one: refused
    empty: int = 0  # blocks without pairs: refused
    off_beat: int = 0  # blocks whose tick does not fit their index
    stale: int = 0


class Assembler:
    """Turns wire blocks of one session into sample blocks, and keeps the clock that their arrivals feed."""

    __slots__ = ("_at_tick", "_i_bounds", "_missed", "_next_index", "_pending", "_plain", "_v_bounds", "clock",
                 "counters", "orientation", "sample_ticks", "stale_s")

    def __init__(self, orientation: Orientation, tick_hz: int, sample_ticks: int, *,
                 stale_s: float = STALE_S) -> None:
        self.orientation = orientation
        self.sample_ticks = sample_ticks
        self.stale_s = stale_s
        self.clock = TickClock(tick_hz)
        self.counters = Counters()
        self._next_index: int | None = None  # unwrapped index that continues the last block
        self._at_tick = 0  # unwrapped tick of that sample
        self._missed = 0
        self._pending = _NONE
        self._v_bounds = orientation.raw_bounds(voltage=True)
        self._i_bounds = orientation.raw_bounds(voltage=False)
        self._plain = (orientation.v_sign == 1 and orientation.v_zero == 0,
                       orientation.i_sign == 1 and orientation.i_zero == 0)

    def take(self, block: Block, arrival_s: float) -> SampleBlock | None:
        """Return the sample block, or None where it was refused as empty, repeated or going backwards (counted)."""
        counters = self.counters
        codes = block.codes
        v, i = codes[0::2], codes[1::2]
        pairs = len(i)
        if not pairs:
            counters.empty += 1
            return None
        expected, at_tick = self._next_index, self._at_tick
        if expected is not None and block.index == expected % WRAP and block.tick == at_tick % WRAP:
            index, gap, tick = expected, 0, at_tick  # it continues the last block
        else:
            index, gap = self._place(block.index, pairs)
            if gap < 0:
                return None
            tick = self._tick(block, index, gap, arrival_s)
        flags = self._pending
        self._pending = _NONE
        v_low, v_high, i_low, i_high = min(v), max(v), min(i), max(i)
        raw = self._raw_flags(v_low, v_high, i_low, i_high)
        orientation = self.orientation
        if not self._plain[0]:
            v, v_low, v_high = _oriented(v, v_low, v_high, orientation.v_sign, orientation.v_zero)
        if not self._plain[1]:
            i, i_low, i_high = _oriented(i, i_low, i_high, orientation.i_sign, orientation.i_zero)
        missed = (block.missed - self._missed) % WRAP if counters.blocks else 0
        self._missed = block.missed
        late_s = self.clock.observe(tick + (pairs - 1) * self.sample_ticks, arrival_s)
        self._at_tick = tick + pairs * self.sample_ticks
        self._next_index = index + pairs
        counters.blocks += 1
        counters.pairs += pairs
        if raw or gap or missed or late_s > self.stale_s:
            flags |= Flags(raw) | self._count(gap, missed, late_s)
        sample = SampleBlock(
            index=index, tick=tick, v=v, i=i, v_word=block.v_word, i_word=block.i_word, state=block.state,
            latched=block.latched != 0, inputs=block.inputs, missed=block.missed, event=block.event, arc=block.arc,
            arrival_s=arrival_s, gap=gap, flags=flags, raw=block, sample_ticks=self.sample_ticks)
        sample._extremes = (v_low, v_high, i_low, i_high)  # type: ignore[misc]  # spares everyone the search
        return sample

    def _place(self, index32: int, pairs: int) -> tuple[int, int]:
        """Return the unwrapped index and the pairs missing before it; -1 pairs means refused."""
        expected = self._next_index
        if expected is None:
            return index32, 0
        gap: int = (index32 - expected) % WRAP
        if gap < HALF:
            return expected + gap, gap
        if WRAP - gap <= pairs:
            self.counters.repeated += 1
        else:
            self.counters.backward += 1
        self._pending |= Flags.REPEATED
        return expected, -1

    def _tick(self, block: Block, index: int, gap: int, arrival_s: float) -> int:
        """Return the unwrapped tick of the first pair; count a tick that does not fit the index."""
        if self._next_index is None:
            return block.tick
        fitting = self._at_tick + gap * self.sample_ticks
        if fitting % WRAP == block.tick:
            return fitting
        self.counters.off_beat += 1
        return max(self.clock.unwrap(block.tick, arrival_s), self._at_tick)

    def _raw_flags(self, v_low: int, v_high: int, i_low: int, i_high: int) -> int:
        """Return the flags that the raw codes themselves raise, by their extremes."""
        low, high, reversed_low, reversed_high = self._v_bounds
        flags = 0
        if v_low <= low or v_high >= high:
            flags = _LIMIT_V
        if v_low < reversed_low or v_high > reversed_high:
            flags |= _REVERSED_V
        low, high, reversed_low, reversed_high = self._i_bounds
        if i_low <= low or i_high >= high:
            flags |= _LIMIT_I
        if i_low < reversed_low or i_high > reversed_high:
            flags |= _REVERSED_I
        return flags

    def _count(self, gap: int, missed: int, late_s: float) -> Flags:
        counters = self.counters
        flags = _NONE
        if gap:
            counters.gaps += 1
            counters.lost += max(0, gap - missed)
            flags |= Flags.GAP
        if missed:
            counters.missed += missed
            flags |= Flags.MISSED
        if late_s > self.stale_s:
            counters.stale += 1
            flags |= Flags.STALE
        return flags


def _oriented(codes: tuple[int, ...], low: int, high: int, sign: int,
              zero: int) -> tuple[tuple[int, ...], int, int]:
    """Return codes above zero in the bench's polarity, with their extremes."""
    if sign == 1:
        return tuple([code - zero for code in codes]), low - zero, high - zero
    return tuple([zero - code for code in codes]), zero - high, zero - low
