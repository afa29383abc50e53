"""Builders for the guard's tests: limits with small round numbers, and blocks cut from per-sample series."""

from collections.abc import Sequence
from typing import Any

from hvhost.guard.limits import GuardLimits
from hvhost.samples.blocks import Flags, SampleBlock
from hvhost.wire.frames import Block
from hvhost.wire.vocabulary import Inputs, McuState

CLOSED = int(Inputs.INTERLOCK | Inputs.EMERGENCY | Inputs.GROUND_OPEN | Inputs.AUXILIARY)
NONE = Flags(0)
RAW = Block(0, 0, 0, 0, 4, 0, CLOSED, 0, 0, 0, ())


def limits(**changes: Any) -> GuardLimits:
    """Limits of a made-up bench: 1,000 pairs/s, one monitor code per word code, 1 V and 1 uA per code."""
    values: dict[str, Any] = {
        "rate_hz": 1000.0, "v_map_q16": 65536, "i_map_q16": 65536, "v_limits": (-32768, 32767),
        "i_limits": (-32768, 32767), "delay_samples": 4, "fall_q16": 0, "drain_q16": 0, "persist": 2,
        "overcurrent": 3000, "overvoltage": 21000, "drop": 1000, "drop_samples": 8, "zero_band": 50, "i_band": 50,
        "saturated_samples": 10, "missing_word": 1000, "missing_samples": 10, "gap_samples": 100, "stale_ms": 500,
        "contacts": CLOSED, "v_per_code": 1.0, "a_per_code": 1e-6}
    return GuardLimits(**{**values, **changes})


def block(index: int, v: Sequence[int], i: Sequence[int], *, v_word: int = 0, i_word: int = 4000,
          state: int = McuState.ENERGISED, inputs: int = CLOSED, gap: int = 0, flags: Flags = NONE,
          arrival_s: float = 0.0) -> SampleBlock:
    """One block; the tick is ten times the index."""
    return SampleBlock(index=index, tick=10 * index, v=tuple(v), i=tuple(i), v_word=v_word, i_word=i_word,
                       state=int(state), latched=False, inputs=inputs, missed=0, event=0, arc=0, arrival_s=arrival_s,
                       gap=gap, flags=flags, raw=RAW, sample_ticks=10)


def cut(v: Sequence[int], i: Sequence[int], words: Sequence[int], size: int, *, start: int = 0,
        state: int = McuState.ENERGISED) -> list[SampleBlock]:
    """Cut per-sample series into blocks of ``size`` pairs; each block carries the word of its first sample."""
    return [block(start + at, v[at:at + size], i[at:at + size], v_word=words[at], state=state)
            for at in range(0, len(v), size)]
