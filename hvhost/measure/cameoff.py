"""A specimen that came off while the voltage was on: its current falls at once and does not come back.

A capacitance from a ramp proves that the specimen was there in that ramp.  A lead that falls off later takes the
specimen's leakage (in a ramp its charging current too) away between two samples, and what is left is the bench's own
draw.  Absorption and the tail of charging fall smoothly: over a step the current falls by far more than it does in the
windows beside it.  A specimen whose leakage cannot be told from the bench's draw can leave unseen in a hold; then only
a current window in the run sheet can ask for more.  The bounds are common practice, from memory, kept by tests.
"""

from dataclasses import dataclass

import numpy as np

from hvhost.measure.timeline import StepSpan
from hvhost.record.data import RunData

WINDOW_S = 0.25
LEAST_SHARE = 0.1  # of the current before
BESIDE = 6.0  # times the change in the windows beside the step
SCATTER = 10.0  # times the usual change from window to window
TRIM = (0.10, 0.95)  # of a ramp: its lag and its end are left out
LIMITED = 0.9  # of the step's current limit: a supply that leaves its limit lets the current fall at once too


@dataclass(frozen=True, slots=True, kw_only=True)
class Fall:
    """The window in which the current fell, and its level (A) before and after."""

    at: int
    before: float
    after: float


def fall_at_once(means: np.ndarray) -> Fall | None:
    """Find the first step down that stays in means of consecutive windows of equal length, None where there is none."""
    if len(means) < 6:
        return None
    usual = float(np.median(np.abs(np.diff(means))))
    for k in range(2, len(means) - 2):
        before, after = float(means[k - 2:k].mean()), float(means[k + 1:k + 3].mean())
        beside = max(abs(float(means[k - 1] - means[k - 2])), abs(float(means[k + 2] - means[k + 1])))
        fall = before - after
        if fall <= max(LEAST_SHARE * abs(before), BESIDE * beside, SCATTER * usual):
            continue
        middle = (before + after) / 2.0
        if float(means[:k].min()) > middle > float(means[k + 1:].max()):
            return Fall(at=k, before=before, after=after)
    return None


def came_off(run: RunData, spans: tuple[StepSpan, ...]) -> str:
    """Say where the current of a completed ramp or hold fell at once; '' where it did in none."""
    for span in spans:
        if not span.complete or span.kind not in ("ramp", "hold"):
            continue
        length = span.end - span.begin
        a, b = span.begin, span.end
        if span.kind == "ramp":
            a, b = span.begin + int(TRIM[0] * length), span.begin + int(TRIM[1] * length)
        elif span.clock is not None and span.clock < span.end:
            a = span.clock
        found = fall_at_once(_means(run, a, b))
        limit_a = span.number_of("limit_a", float("inf"))
        if found is not None and found.before < LIMITED * limit_a:
            return (f"the current fell at once from {found.before * 1e6:.4g} µA to {found.after * 1e6:.4g} µA, "
                    f"{(a - span.begin) * _pair_s(run) + found.at * WINDOW_S:.1f} s into {span.kind} {span.name!r}")
    return ""


def _pair_s(run: RunData) -> float:
    return run.meta.sample_ticks / run.meta.tick_hz


def _means(run: RunData, a: int, b: int) -> np.ndarray:
    """Mean current of each whole window of the rows a to b; a window without a usable sample is left out."""
    rows = max(1, round(WINDOW_S / _pair_s(run)))
    usable, amps = run.usable(a, b), run.amps(a, b)
    cuts = [slice(k, k + rows) for k in range(0, b - a - rows + 1, rows)]
    return np.array([float(amps[cut][usable[cut]].mean()) for cut in cuts if usable[cut].any()])
