"""What a measurement gives, and the little statistics behind it: medians of interleaved blocks, p99 with an interval.

The interval of the p99 is a percentile bootstrap (Efron and Tibshirani, An Introduction to the Bootstrap, 1993, ch. 13)
over whole blocks, since calls of one block share the moment's weather and are not independent of each other.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from random import Random
from statistics import median
from typing import Any

RESAMPLES = 400
BLOCKS = 20  # least number of blocks of each side
PER_BLOCK = 100  # calls in each

Say = Callable[[str], None]


@dataclass(frozen=True, slots=True, kw_only=True)
class Line:
    """One figure beside its bound and its aim; ``worst`` says whether the bound is the most or the least allowed."""

    budget: str  # 'B1'
    what: str
    measured: float
    bound: float
    unit: str
    against: str  # what it was compared with
    aim: float | None = None
    worst: str = "most"  # 'most': measured may not exceed the bound; 'least': may not fall below it
    judged: bool = True  # False: a figure without a bound of its own, shown for the reader
    note: str = ""
    raw: Mapping[str, Any] = field(default_factory=dict)

    @property
    def within(self) -> bool:
        """Whether the bound holds (a figure that is only shown always does)."""
        if not self.judged:
            return True
        return self.measured <= self.bound if self.worst == "most" else self.measured >= self.bound

    def to_json(self) -> dict[str, Any]:
        """Return plain values."""
        return {"budget": self.budget, "what": self.what, "measured": self.measured, "unit": self.unit,
                "bound": self.bound, "worst": self.worst, "aim": self.aim, "against": self.against,
                "judged": self.judged, "within": self.within, "note": self.note, "raw": dict(self.raw)}


@dataclass(frozen=True, slots=True, kw_only=True)
class Sides:
    """Seconds of two sides, block by block: ``ours[k]`` and ``other[k]`` were taken right after each other."""

    ours: tuple[tuple[float, ...], ...]
    other: tuple[tuple[float, ...], ...]

    @property
    def ratio(self) -> float:
        """Median of ours over median of the other, all calls together."""
        return median(flat(self.ours)) / median(flat(self.other))

    @property
    def block_ratios(self) -> tuple[float, ...]:
        """The ratio of medians of each pair of blocks, sorted: its spread tells the weather."""
        return tuple(sorted(median(a) / median(b) for a, b in zip(self.ours, self.other, strict=True)))

    def raw(self, scale: float = 1e6) -> dict[str, Any]:
        """Return the figures behind the ratio; times in microseconds unless told otherwise."""
        ratios = self.block_ratios
        return {"ours": spread(self.ours, scale), "other": spread(self.other, scale), "ratio": self.ratio,
                "ratio_lowest": ratios[0], "ratio_highest": ratios[-1], "blocks": len(self.ours),
                "per_block": len(self.ours[0])}


def interleaved(ours: Callable[[], Sequence[float]], other: Callable[[], Sequence[float]], *, blocks: int = BLOCKS,
                say: Say | None = None) -> Sides:
    """Take blocks of both sides in turn; each call returns the seconds of one block's calls."""
    a: list[tuple[float, ...]] = []
    b: list[tuple[float, ...]] = []
    for k in range(blocks):
        if k % 2:  # neither side is always the one that follows the other
            b.append(tuple(other()))
            a.append(tuple(ours()))
        else:
            a.append(tuple(ours()))
            b.append(tuple(other()))
        if say is not None:
            say(f"block {k + 1} of {blocks}")
    return Sides(ours=tuple(a), other=tuple(b))


def flat(blocks: Sequence[Sequence[float]]) -> list[float]:
    """Return all calls of all blocks."""
    return [seconds for block in blocks for seconds in block]


def quantile(values: Sequence[float], share: float) -> float:
    """Return the value below which ``share`` of the values lie (nearest rank)."""
    ordered = sorted(values)
    return ordered[min(len(ordered) - 1, int(share * len(ordered)))]


def spread(blocks: Sequence[Sequence[float]], scale: float) -> dict[str, float]:
    """Return median, p99 with its 95 % bootstrap interval, and largest, times ``scale``."""
    values = flat(blocks)
    low, high = p99_interval(blocks)
    return {"median": median(values) * scale, "p99": quantile(values, 0.99) * scale, "p99_low": low * scale,
            "p99_high": high * scale, "largest": max(values) * scale}


def p99_interval(blocks: Sequence[Sequence[float]], seed: int = 1) -> tuple[float, float]:
    """Return the 95 % bootstrap interval of the p99, resampling whole blocks; the same blocks give the same one."""
    rng = Random(seed)
    found = sorted(quantile(flat(rng.choices(blocks, k=len(blocks))), 0.99) for _ in range(RESAMPLES))
    return found[int(0.025 * RESAMPLES)], found[int(0.975 * RESAMPLES)]
