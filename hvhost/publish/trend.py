"""The trend: extremes over time in bounded memory, and their plot in braille.

:class:`TrendKeeper` keeps a whole run in at most ``TREND_KEPT`` buckets: when they are full, neighbours are merged
and the bucket's span doubles, so that no peak is ever lost and ten hours take as much memory as ten seconds.
"""

import math
from collections.abc import Sequence
from itertools import pairwise

from hvhost.publish.snapshot import TREND_KEPT, TrendBucket

FIRST_SPAN_S = 0.25  # a minute in full detail before the first merge
_BASE = 0x2800
_DOTS = ((0x01, 0x02, 0x04, 0x40), (0x08, 0x10, 0x20, 0x80))  # Unicode braille: left and right column, top to bottom
_JOIN_SPANS = 2.5  # buckets farther apart than this many spans have a gap between them


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
        if not all(map(math.isfinite, (t_s, v_min, v_max, i_min, i_max))):
            return
        block = TrendBucket(t_s, v_min, v_max, i_min, i_max)
        if self._buckets and t_s <= self._open_until_s:
            self._buckets[-1] = _merged(self._buckets[-1], block)
            return
        if len(self._buckets) >= self._kept:
            pairs = zip(self._buckets[::2], self._buckets[1::2], strict=False)
            self._buckets = [_merged(*pair) for pair in pairs] + self._buckets[len(self._buckets) // 2 * 2:]
            self.span_s *= 2.0
        self._buckets.append(block)
        self._open_until_s = t_s + self.span_s

    def buckets(self) -> tuple[TrendBucket, ...]:
        """Return what is kept, oldest first."""
        return tuple(self._buckets)


def _merged(early: TrendBucket, late: TrendBucket) -> TrendBucket:
    return TrendBucket(late.t_s, min(early.v_min, late.v_min), max(early.v_max, late.v_max),
                       min(early.i_min, late.i_min), max(early.i_max, late.i_max))


def braille_plot(points: Sequence[tuple[float, float, float]], width: int, rows: int, top: float) -> list[str]:
    """Return ``rows`` lines of ``width`` cells, braille or blank: spans (time, low, high) between 0 and ``top``.

    The latest point stands at the right edge.  Neighbours are joined, gaps in time are left open; what lies outside
    0..top is drawn at the edge.
    """
    if width < 1 or rows < 1:
        return []
    grid = [[0] * width for _ in range(rows)]
    if points and top > 0.0:
        _draw(grid, points, top)
    return ["".join(chr(_BASE + cell) if cell else " " for cell in row) for row in grid]


def _draw(grid: list[list[int]], points: Sequence[tuple[float, float, float]], top: float) -> None:
    columns, levels = len(grid[0]) * 2, len(grid) * 4
    end_s, begin_s = points[-1][0], points[0][0]
    per_s = (columns - 1) / (end_s - begin_s) if end_s > begin_s else 0.0
    steps_s = sorted(late[0] - early[0] for early, late in pairwise(points))
    typical_s = steps_s[len(steps_s) // 2] if steps_s else 0.0
    before: tuple[float, int, int, int] | None = None
    for t_s, low, high in points:
        column = columns - 1 - round((end_s - t_s) * per_s)
        lower, upper = _level(low, top, levels), _level(high, top, levels)
        joined = before is not None and t_s - before[0] <= _JOIN_SPANS * typical_s
        if joined and before is not None:
            _join(grid, before[1:], (column, lower, upper))
        _span(grid, column, lower, upper)
        before = (t_s, column, lower, upper)


def _level(value: float, top: float, levels: int) -> int:
    return round(max(0.0, min(1.0, value / top)) * (levels - 1))


def _join(grid: list[list[int]], before: tuple[int, int, int], now: tuple[int, int, int]) -> None:
    """Fill the columns between two spans on straight lines, and close a vertical gap between touching columns."""
    first, last = before[0], now[0]
    for column in range(first + 1, last):
        share = (column - first) / (last - first)
        _span(grid, column, round(before[1] + share * (now[1] - before[1])),
              round(before[2] + share * (now[2] - before[2])))
    if now[1] > before[2]:
        _span(grid, last, before[2], now[1])
    elif now[2] < before[1]:
        _span(grid, last, now[2], before[1])


def _span(grid: list[list[int]], column: int, lower: int, upper: int) -> None:
    levels = len(grid) * 4
    for level in range(lower, upper + 1):
        below_top = levels - 1 - level
        grid[below_top // 4][column // 2] |= _DOTS[column % 2][below_top % 4]


def nice_top(value: float) -> float:
    """Return the least of 1, 2, 2.5, 5 times a power of ten that is not below ``value``; 1 for nothing."""
    if not math.isfinite(value) or value <= 0.0:
        return 1.0
    power = 10.0 ** math.floor(math.log10(value))
    return next(step * power for step in (1.0, 2.0, 2.5, 5.0, 10.0, 20.0) if step * power >= value * (1.0 - 1e-9))
