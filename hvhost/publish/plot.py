"""Plots in braille: spans over time as they were measured, and the dotted line of what is still to come.

A plot covers a stated stretch of time and the values from 0 to ``top``; what lies outside is drawn at the edge.
Where a mark for the present stands, a column of '┊' goes through the cells that hold nothing else.
"""

import math
from collections.abc import Sequence
from itertools import pairwise

_BASE = 0x2800
_DOTS = ((0x01, 0x02, 0x04, 0x40), (0x08, 0x10, 0x20, 0x80))  # Unicode braille: left and right column, top to bottom
_JOIN_SPANS = 2.5  # spans farther apart than this many typical steps have a gap between them
_EVERY = 2  # of the future's columns one in so many is drawn: dotted is read as 'not yet' without any colour
MARK = "┊"


class Plot:
    """A grid of ``width`` x ``rows`` cells over [begin_s, end_s] x [0, top]."""

    def __init__(self, width: int, rows: int, begin_s: float, end_s: float, top: float) -> None:
        self._grid = [[0] * width for _ in range(rows)]
        self._columns, self._levels = width * 2, rows * 4
        self._begin_s, self._top = begin_s, top
        spread_s = end_s - begin_s
        self._per_s = (self._columns - 1) / spread_s if spread_s > 0.0 and self._columns else 0.0
        self._mark: int | None = None

    def spans(self, points: Sequence[tuple[float, float, float]]) -> None:
        """Draw (time, low, high) in order of time; neighbours are joined, gaps in time are left open."""
        steps_s = sorted(late[0] - early[0] for early, late in pairwise(points))
        typical_s = steps_s[len(steps_s) // 2] if steps_s else 0.0
        before: tuple[float, int, int, int] | None = None
        for t_s, low, high in points:
            column = self.column(t_s)
            if column is None:
                continue
            lower, upper = self._level(low), self._level(high)
            if before is not None and t_s - before[0] <= _JOIN_SPANS * typical_s:
                self._join(before[1:], (column, lower, upper))
            self._span(column, lower, upper)
            before = (t_s, column, lower, upper)

    def dotted(self, points: Sequence[tuple[float, float]]) -> None:
        """Draw lines between (time, value), one dot in every few columns."""
        for (t0_s, v0), (t1_s, v1) in pairwise(points):
            for column in range(max(0, self._near(t0_s)), min(self._near(t1_s), self._columns - 1) + 1):
                if column % _EVERY:
                    continue
                t_s = self._begin_s + column / self._per_s if self._per_s else t1_s
                share = max(0.0, min(1.0, (t_s - t0_s) / (t1_s - t0_s))) if t1_s > t0_s else 1.0
                level = self._level(v0 + share * (v1 - v0))
                self._span(column, level, level)

    def mark(self, t_s: float) -> None:
        """Stand a vertical line at this time."""
        column = self.column(t_s)
        self._mark = None if column is None else column // 2

    def column(self, t_s: float) -> int | None:
        """Return the column of dots of a time, None outside the plot."""
        column = self._near(t_s)
        return column if 0 <= column < self._columns else None

    def lines(self) -> list[str]:
        """Return the picture, braille or blank."""
        drawn = []
        for row in self._grid:
            cells = [chr(_BASE + cell) if cell else " " for cell in row]
            if self._mark is not None and cells[self._mark] == " ":
                cells[self._mark] = MARK
            drawn.append("".join(cells))
        return drawn

    def _near(self, t_s: float) -> int:
        return round(max(-1.0, min(self._columns + 1.0, (t_s - self._begin_s) * self._per_s)))

    def _level(self, value: float) -> int:
        share = value / self._top if self._top > 0.0 else 0.0
        return round(max(0.0, min(1.0, share)) * (self._levels - 1))

    def _join(self, before: tuple[int, int, int], now: tuple[int, int, int]) -> None:
        """Fill the columns between two spans on straight lines, and close a vertical gap between touching columns."""
        first, last = before[0], now[0]
        for column in range(first + 1, last):
            share = (column - first) / (last - first)
            self._span(column, round(before[1] + share * (now[1] - before[1])),
                       round(before[2] + share * (now[2] - before[2])))
        if now[1] > before[2]:
            self._span(last, before[2], now[1])
        elif now[2] < before[1]:
            self._span(last, now[2], before[1])

    def _span(self, column: int, lower: int, upper: int) -> None:
        for level in range(lower, upper + 1) if self._levels else ():
            below_top = self._levels - 1 - level
            self._grid[below_top // 4][column // 2] |= _DOTS[column % 2][below_top % 4]


def nice_top(value: float) -> float:
    """Return the least of 1, 2, 2.5, 5 times a power of ten that is not below ``value``; 1 for nothing."""
    if not math.isfinite(value) or value <= 0.0:
        return 1.0
    power = 10.0 ** math.floor(math.log10(value))
    return next(step * power for step in (1.0, 2.0, 2.5, 5.0, 10.0, 20.0) if step * power >= value * (1.0 - 1e-9))
