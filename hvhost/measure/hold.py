"""The voltage applied over a hold: its mean with uncertainty, how long it stood inside the tolerance, its peaks.

The value of a direct test voltage is the arithmetic mean, the tolerance ±1 % up to 60 s and ±3 % beyond (IEC 60060-1);
whether it is inside is judged on the mean over a window, as the plan says.  The time is counted here from the record,
apart from the clock that ran the hold.
"""

from dataclasses import dataclass

import numpy as np

from hvhost.measure.timeline import StepSpan
from hvhost.measure.uncertainty import Value, mean_value
from hvhost.record.data import Floats, Mask, RunData


@dataclass(frozen=True, slots=True, kw_only=True)
class HoldResult:
    """What one hold applied; volts are magnitudes, times in seconds."""

    number: int
    name: str
    place: str
    level_v: float
    tolerance: float
    window_s: float
    asked_s: float
    clock: str
    complete: bool  # the host ended it as done
    mean: Value | None  # None: no usable sample
    inside_s: float  # longest unbroken stretch, or the sum where the clock accumulates
    resolution_s: float  # of that time: two blocks
    peak_v: float
    lowest_v: float
    over_samples: int  # single samples above the tolerance: overstress
    ripple_v: float  # half of max - min over the clock's stretch, noise included
    missing: int  # samples absent within it
    clock_row: int | None
    begin_row: int
    end_row: int

    @property
    def long_enough(self) -> bool:
        """Whether the voltage stood inside its tolerance for the time asked."""
        return self.inside_s >= self.asked_s - self.resolution_s

    @property
    def level_met(self) -> bool:
        """Whether the measured mean lies within the tolerance (simple acceptance)."""
        return self.mean is not None and abs(self.mean.value - self.level_v) <= self.tolerance * self.level_v


def window_rows(run: RunData, window_s: float) -> int:
    """Return how many rows a window holds, at least one."""
    return max(1, round(window_s * run.meta.tick_hz / run.meta.sample_ticks))


def trailing_mean(values: Floats, rows: int) -> Floats:
    """Return the mean over the last ``rows`` values at each value (fewer at the beginning)."""
    total = np.concatenate(([0.0], np.cumsum(values)))
    ends = np.arange(1, len(values) + 1)
    starts = np.maximum(ends - rows, 0)
    return np.asarray((total[ends] - total[starts]) / (ends - starts))


def longest_true(mask: Mask) -> int:
    """Return the length of the longest unbroken stretch of True."""
    edges = np.flatnonzero(np.diff(np.concatenate(([False], mask, [False])).astype(np.int8)))
    return int((edges[1::2] - edges[0::2]).max()) if len(edges) else 0


def measure_hold(run: RunData, span: StepSpan) -> HoldResult:
    """Measure one hold from the record."""
    level, tolerance = span.number_of("v"), span.number_of("tolerance", 0.01)
    window_s = span.number_of("window_s", 1.0)
    usable = run.usable(span.begin, span.end)
    volts = run.volts(span.begin, span.end)[usable]
    inside = np.abs(trailing_mean(volts, window_rows(run, window_s)) - level) <= tolerance * level
    accumulate = span.step.get("clock") == "accumulate"
    period_s = run.meta.sample_ticks / run.meta.tick_hz
    counted = int(inside.sum()) if accumulate else longest_true(inside)
    start = span.clock if span.clock is not None and span.begin <= span.clock < span.end else None
    clocked = run.volts(start, span.end)[run.usable(start, span.end)] if start is not None else volts[inside]
    longest_block = int(run.head["pairs"].max()) if len(run.head) else 1
    seen = clocked if len(clocked) else volts
    return HoldResult(
        number=span.number, name=span.name, place=str(span.step.get("place", "")), level_v=level, tolerance=tolerance,
        window_s=window_s, asked_s=span.number_of("hold_s"), clock=str(span.step.get("clock", "continuous")),
        complete=span.complete, mean=mean_value(run.meta.voltage, seen) if len(seen) else None,
        inside_s=counted * period_s, resolution_s=2 * longest_block * period_s,
        peak_v=float(seen.max()) if len(seen) else 0.0, lowest_v=float(seen.min()) if len(seen) else 0.0,
        over_samples=int((volts > level * (1.0 + tolerance)).sum()),
        ripple_v=float(seen.max() - seen.min()) / 2.0 if len(seen) else 0.0,
        missing=sum(g.missing for g in run.gaps if span.begin <= g.row <= span.end),
        clock_row=start, begin_row=span.begin, end_row=span.end)
