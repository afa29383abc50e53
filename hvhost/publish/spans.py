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
        self._span = SpanView()

    def add(self, index: int, pairs: int, *, volts: tuple[float, float, float], amps: tuple[float, float, float],
            gap: int = 0, flagged: bool = False) -> None:
        """Take one block: (least, mean, greatest) of both channels; ``gap`` pairs are missing before it.

        A jump of the index beyond the gap is pairs that nobody handed in; an index that goes back is a new session.
        """
        unseen = max(0, index - gap - self._next) if self._next is not None else 0
        self._next = index + pairs
        if pairs < 1 or not all(map(math.isfinite, (*volts, *amps))):
            return
        self._span = self._span.joined(SpanView(
            pairs=pairs, unseen=unseen, gap=gap > 0, flagged=flagged, volts_min=volts[0], volts=volts[1],
            volts_max=volts[2], amps_min=amps[0], amps=amps[1], amps_max=amps[2]))

    @property
    def so_far(self) -> SpanView:
        """The span since the last `take`, left as it is."""
        return self._span

    def take(self) -> SpanView:
        """The span since the last call."""
        span, self._span = self._span, SpanView()
        return span


def _mean(one: SpanView, two: SpanView, name: str) -> float:
    return float((getattr(one, name) * one.pairs + getattr(two, name) * two.pairs) / (one.pairs + two.pairs))


def _least(one: float | None, two: float | None) -> float | None:
    return min(v for v in (one, two) if v is not None)


def _greatest(one: float | None, two: float | None) -> float | None:
    return max(v for v in (one, two) if v is not None)
