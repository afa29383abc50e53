"""What was measured over time, in bounded memory and without losing a peak: the whole run, and the last minute.

:class:`TrendKeeper` keeps a whole run in at most ``TREND_KEPT`` buckets: when they are full, neighbours are merged
and the bucket's span doubles, so that ten hours take as much memory as ten seconds.  :class:`RecentKeeper` keeps the
last minute in buckets of half a second, however long the run is.
"""

import math
from collections import deque

from hvhost.publish.snapshot import TREND_KEPT, TrendBucket

FIRST_SPAN_S = 0.25  # a minute in full detail before the first merge
RECENT_S = 60.0
RECENT_SPAN_S = 0.5


class TrendKeeper:
    """Takes extremes of blocks, gives back buckets; times are host monotonic seconds and never go backwards."""

    def __init__(self, kept: int = TREND_KEPT, span_s: float = FIRST_SPAN_S) -> None:
        self._kept, self._first_span_s = kept, span_s
        self.clear()

    def clear(self) -> None:
        """Begin anew, as at the start of a run."""
        self.span_s = self._first_span_s
        self._buckets: list[TrendBucket] = []
        self._open_until_s = -math.inf

    def add(self, t_s: float, v_min: float, v_max: float, i_min: float, i_max: float) -> None:
        """Take the extremes of one block whose last sample is at ``t_s``; values that are not finite are left out."""
        block = TrendBucket(t_s, v_min, v_max, i_min, i_max)
        if not all(map(math.isfinite, block)):
            return
        if self._buckets and t_s <= self._open_until_s:
            self._buckets[-1] = merged(self._buckets[-1], block)
            return
        if len(self._buckets) >= self._kept:
            pairs = zip(self._buckets[::2], self._buckets[1::2], strict=False)
            self._buckets = [merged(*pair) for pair in pairs] + self._buckets[len(self._buckets) // 2 * 2:]
            self.span_s *= 2.0
        self._buckets.append(block)
        self._open_until_s = t_s + self.span_s

    def buckets(self) -> tuple[TrendBucket, ...]:
        """Return what is kept, oldest first."""
        return tuple(self._buckets)


class RecentKeeper:
    """The last ``RECENT_S`` seconds; the same contract as :class:`TrendKeeper`."""

    def __init__(self) -> None:
        self._buckets: deque[TrendBucket] = deque(maxlen=round(RECENT_S / RECENT_SPAN_S) + 1)
        self._open_until_s = -math.inf

    def clear(self) -> None:
        """Begin anew, as at the start of a run."""
        self._buckets.clear()
        self._open_until_s = -math.inf

    def add(self, t_s: float, v_min: float, v_max: float, i_min: float, i_max: float) -> None:
        """Take the extremes of one block; what is older than a minute goes."""
        block = TrendBucket(t_s, v_min, v_max, i_min, i_max)
        if not all(map(math.isfinite, block)):
            return
        if self._buckets and t_s <= self._open_until_s:
            self._buckets[-1] = merged(self._buckets[-1], block)
        else:
            self._buckets.append(block)
            self._open_until_s = t_s + RECENT_SPAN_S
        while self._buckets[0].t_s < t_s - RECENT_S:
            self._buckets.popleft()

    def buckets(self) -> tuple[TrendBucket, ...]:
        """Return what is kept, oldest first."""
        return tuple(self._buckets)


def merged(early: TrendBucket, late: TrendBucket) -> TrendBucket:
    """Return one bucket with the extremes of two that follow each other."""
    return TrendBucket(late.t_s, min(early.v_min, late.v_min), max(early.v_max, late.v_max),
                       min(early.i_min, late.i_min), max(early.i_max, late.i_max))


def brief(buckets: tuple[TrendBucket, ...]) -> tuple[TrendBucket, ...]:
    """Return the buckets to the millisecond, the millivolt and the nanoampere: no screen shows more, and it is short.

    The extremes are rounded outwards by nobody: half a millivolt is below every converter's step.
    """
    return tuple(TrendBucket(round(one.t_s, 3), round(one.v_min, 3), round(one.v_max, 3), round(one.i_min, 9),
                             round(one.i_max, 9)) for one in buckets)
