"""Least, mean and greatest over intervals of monotonic time, from spans that cover every sample once.

A span (`publish.spans`) covers the samples between two snapshots.  Means are weighted by samples, extremes are never
averaged, and an interval without a sample says so instead of repeating an old value.
"""

import math
from dataclasses import dataclass

from hvhost.publish.spans import SpanView


@dataclass(frozen=True, slots=True, kw_only=True)
class Interval:
    """What one telemetry message tells: oriented V and A, None where there was no sample."""

    span_s: float
    span: SpanView


class IntervalKeeper:
    """Adds spans up to intervals of ``every_s``; times are monotonic seconds (S10)."""

    def __init__(self, every_s: float) -> None:
        self._every_s = every_s
        self._began_s = math.nan
        self._due_s = math.nan
        self._sum = SpanView()

    def add(self, now_s: float, span: SpanView | None) -> Interval | None:
        """Take the span that ends now; return the interval that it completes.

        A late call gives one longer interval, never several at once: after a stall nothing floods.
        """
        if math.isnan(self._due_s):
            self._began_s, self._due_s = now_s, now_s + self._every_s
        if span is not None:
            self._sum = self._sum.joined(span)
        if now_s < self._due_s:
            return None
        done = Interval(span_s=now_s - self._began_s, span=self._sum)
        self._began_s, self._sum = now_s, SpanView()
        self._due_s += self._every_s * (math.floor((now_s - self._due_s) / self._every_s) + 1)  # keeps the phase
        if self._due_s <= now_s:  # the last bit of a long sum
            self._due_s += self._every_s
        return done
