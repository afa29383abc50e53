"""Extremes and means over every sample between two snapshots, so that an outlet with a rate of its own hides no peak.

A snapshot's reading is the newest block only; several blocks lie between two snapshots.  Values are oriented V and A.
"""

import math
from dataclasses import dataclass
from typing import Self


@dataclass(frozen=True, slots=True, kw_only=True)
class SpanView:
    """What the samples since the snapshot before were: means are weighted by pairs; all None where there were none.

    ``unseen`` counts pairs that were taken but are not covered, ``gap`` says that pairs are missing altogether.
    """

    pairs: int = 0
    unseen: int = 0
    gap: bool = False
    flagged: bool = False
    volts: float | None = None
    volts_min: float | None = None
    volts_max: float | None = None
    amps: float | None = None
    amps_min: float | None = None
    amps_max: float | None = None

    def joined(self, later: Self) -> "SpanView":
        """The span that covers both."""
        if not later.pairs or not self.pairs:
            full, bare = (self, later) if self.pairs else (later, self)
            return SpanView(
                pairs=full.pairs, unseen=full.unseen + bare.unseen, gap=full.gap or bare.gap,
                flagged=full.flagged or bare.flagged, volts=full.volts, volts_min=full.volts_min,
                volts_max=full.volts_max, amps=full.amps, amps_min=full.amps_min, amps_max=full.amps_max)
        return SpanView(
            pairs=self.pairs + later.pairs, unseen=self.unseen + later.unseen, gap=self.gap or later.gap,
            flagged=self.flagged or later.flagged, volts=_mean(self, later, "volts"),
            volts_min=_least(self.volts_min, later.volts_min), volts_max=_greatest(self.volts_max, later.volts_max),
            amps=_mean(self, later, "amps"), amps_min=_least(self.amps_min, later.amps_min),
            amps_max=_greatest(self.amps_max, later.amps_max))


class SpanKeeper:
    """Takes blocks, gives one span for each snapshot; ``index`` counts pairs and is unwrapped."""

    def __init__(self) -> None:
        self._next: int | None = None
        self._begin()

    def _begin(self) -> None:
        self._pairs = self._unseen = 0
        self._gap = self._flagged = False
        self._volts = self._amps = 0.0  # sums over pairs
        self._v_min = self._i_min = math.inf
        self._v_max = self._i_max = -math.inf

    def add(self, index: int, pairs: int, *, volts: tuple[float, float, float], amps: tuple[float, float, float],
            gap: int = 0, flagged: bool = False) -> None:
        """Take one block: (least, mean, greatest) of both channels; ``gap`` pairs are missing before it.

        A jump of the index beyond the gap is pairs that nobody handed in; an index that goes back is a new session.
        """
        unseen = max(0, index - gap - self._next) if self._next is not None else 0
        self._next = index + pairs
        v_min, v_mean, v_max = volts
        i_min, i_mean, i_max = amps
        if pairs < 1 or not math.isfinite(v_min + v_mean + v_max + i_min + i_mean + i_max):
            return
        self._pairs += pairs
        self._unseen += unseen
        self._gap = self._gap or gap > 0
        self._flagged = self._flagged or flagged
        self._volts += v_mean * pairs
        self._amps += i_mean * pairs
        if v_min < self._v_min:
            self._v_min = v_min
        if v_max > self._v_max:
            self._v_max = v_max
        if i_min < self._i_min:
            self._i_min = i_min
        if i_max > self._i_max:
            self._i_max = i_max

    @property
    def so_far(self) -> SpanView:
        """The span since the last `take`, left as it is."""
        pairs = self._pairs
        if not pairs:
            return SpanView()
        return SpanView(
            pairs=pairs, unseen=self._unseen, gap=self._gap, flagged=self._flagged, volts=self._volts / pairs,
            volts_min=self._v_min, volts_max=self._v_max, amps=self._amps / pairs, amps_min=self._i_min,
            amps_max=self._i_max)

    def take(self) -> SpanView:
        """The span since the last call."""
        span = self.so_far
        self._begin()
        return span


def _mean(one: SpanView, two: SpanView, name: str) -> float:
    return float((getattr(one, name) * one.pairs + getattr(two, name) * two.pairs) / (one.pairs + two.pairs))


def _least(one: float | None, two: float | None) -> float | None:
    return min(v for v in (one, two) if v is not None)


def _greatest(one: float | None, two: float | None) -> float | None:
    return max(v for v in (one, two) if v is not None)
