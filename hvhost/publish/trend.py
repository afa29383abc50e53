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


class _Open:
    """The bucket that blocks are being added to; written for the pace of blocks, not of buckets."""

    __slots__ = ("_i_max", "_i_min", "_t_s", "_v_max", "_v_min", "until_s")

    def __init__(self) -> None:
        self.until_s = -math.inf  # -inf: no bucket is open
        self._t_s = self._v_min = self._v_max = self._i_min = self._i_max = 0.0

    def begin(self, block: tuple[float, float, float, float, float], span_s: float) -> None:
        """Open a bucket with its first block."""
        self._t_s, self._v_min, self._v_max, self._i_min, self._i_max = block
        self.until_s = self._t_s + span_s

    def add(self, t_s: float, v_min: float, v_max: float, i_min: float, i_max: float) -> None:
        """Widen the bucket by a block."""
        self._t_s = t_s
        if v_min < self._v_min:
            self._v_min = v_min
        if v_max > self._v_max:
            self._v_max = v_max
        if i_min < self._i_min:
            self._i_min = i_min
        if i_max > self._i_max:
            self._i_max = i_max

    @property
    def buckets(self) -> tuple[TrendBucket, ...]:
        """The open bucket, none where none is."""
        if self.until_s == -math.inf:
            return ()
        return (TrendBucket(self._t_s, self._v_min, self._v_max, self._i_min, self._i_max),)


class TrendKeeper:
    """Takes extremes of blocks, gives back buckets; times are host monotonic seconds and never go backwards."""

    def __init__(self, kept: int = TREND_KEPT, span_s: float = FIRST_SPAN_S) -> None:
        self._kept, self._first_span_s = kept, span_s
        self.clear()

    def clear(self) -> None:
        """Begin anew, as at the start of a run."""
        self.span_s = self._first_span_s
        self._buckets: list[TrendBucket] = []  # closed ones
        self._open = _Open()

    def add(self, t_s: float, v_min: float, v_max: float, i_min: float, i_max: float) -> None:
        """Take the extremes of one block whose last sample is at ``t_s``; values that are not finite are left out."""
        if not math.isfinite(t_s + v_min + v_max + i_min + i_max):  # one that is not finite makes the sum not finite
            return
        if t_s <= self._open.until_s:
            self._open.add(t_s, v_min, v_max, i_min, i_max)
            return
        self._buckets += self._open.buckets
        if len(self._buckets) >= self._kept:
            pairs = zip(self._buckets[::2], self._buckets[1::2], strict=False)
            self._buckets = [merged(*pair) for pair in pairs] + self._buckets[len(self._buckets) // 2 * 2:]
            self.span_s *= 2.0
        self._open.begin((t_s, v_min, v_max, i_min, i_max), self.span_s)

    def buckets(self) -> tuple[TrendBucket, ...]:
        """Return what is kept, oldest first."""
        return (*self._buckets, *self._open.buckets)


class RecentKeeper:
    """The last ``RECENT_S`` seconds; the same contract as :class:`TrendKeeper`."""

    def __init__(self) -> None:
        self._buckets: deque[TrendBucket] = deque(maxlen=round(RECENT_S / RECENT_SPAN_S))  # closed ones
        self._open = _Open()

    def clear(self) -> None:
        """Begin anew, as at the start of a run."""
        self._buckets.clear()
        self._open = _Open()

    def add(self, t_s: float, v_min: float, v_max: float, i_min: float, i_max: float) -> None:
        """Take the extremes of one block; what is older than a minute goes."""
        if not math.isfinite(t_s + v_min + v_max + i_min + i_max):
            return
        if t_s <= self._open.until_s:
            self._open.add(t_s, v_min, v_max, i_min, i_max)
        else:
            self._buckets += self._open.buckets
            self._open.begin((t_s, v_min, v_max, i_min, i_max), RECENT_SPAN_S)
        while self._buckets and self._buckets[0].t_s < t_s - RECENT_S:
            self._buckets.popleft()

    def buckets(self) -> tuple[TrendBucket, ...]:
        """Return what is kept, oldest first."""
        return (*self._buckets, *self._open.buckets)


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
