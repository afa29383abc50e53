"""MCU ticks to host time and UTC: offset and drift from the lower envelope of the arrivals, in bounded state.

A line arrives at ``a = host(t) + d`` where ``host(t)`` is the moment at which tick ``t`` fell on the host's monotonic
clock and ``d >= 0`` is what the wire and both machines took.  ``d`` is never negative and often small, so the line
that supports the points ``(t, a)`` from below is the best estimate of ``host(t)`` (the one-way method of Moon, Skelly
and Towsley, "Estimation and removal of clock skew from network delay measurements", 1999).  The smallest delay itself
cannot be seen from one side: every time here is late by it.

The estimate is followed by slewing, so time never runs backwards and two ticks keep their order.  The wall clock is
asked for nothing but anchors: a step of it starts a new anchor and moves no tick.
"""

from dataclasses import dataclass
from itertools import pairwise

WRAP = 1 << 32
HALF = 1 << 31
BUCKET_S = 8.0  # one minimum is kept for each of these
BUCKETS = 24  # about three minutes: long against jitter, short against the drift of a crystal with temperature
SETTLE_S = 1.0  # until then the estimate steps down to each smaller delay instead of slewing
DRIFT_MAX = 2e-3  # ceramic resonators stay within 0.5 %, crystals within 0.01 %; the host's clock is slewed as well
CATCH_UP_MAX = 5e-4  # steepest correction beside the drift
STEP_S = 0.05  # wall and monotonic clock part by more than this: the wall clock was stepped


@dataclass(frozen=True, slots=True, kw_only=True)
class Anchor:
    """One moment on three clocks: unwrapped MCU tick, host monotonic seconds, UTC nanoseconds."""

    tick: int
    mono_s: float
    utc_ns: int


class TickClock:
    """Estimates when a tick fell, from the ticks and arrival times of lines that were sent at that tick."""

    __slots__ = ("_anchor", "_base_s", "_base_tick", "_bucket", "_last_s", "_last_tick", "_minima", "_nominal_s",
                 "_rate_s", "_settled_tick", "tick_hz")

    def __init__(self, tick_hz: int) -> None:
        self.tick_hz = tick_hz
        self._nominal_s = 1.0 / tick_hz
        self._rate_s = self._nominal_s  # seconds per tick in force
        self._base_tick = 0
        self._base_s = 0.0
        self._last_tick: int | None = None
        self._last_s = 0.0
        self._settled_tick = 0
        self._minima: list[tuple[int, float]] = []
        self._bucket: tuple[int, int, float] | None = None  # end tick, tick and arrival of its smallest delay
        self._anchor: Anchor | None = None

    def unwrap(self, tick32: int, arrival_s: float) -> int:
        """Return the unwrapped tick that ends in these 32 bits and lies nearest to what the arrival suggests.

        Right for a silence of any length as long as the clocks part by less than half a wrap meanwhile.
        """
        if self._last_tick is None:
            return tick32
        expected = self._last_tick + int((arrival_s - self._last_s) * self.tick_hz)
        return tick32 + ((expected - tick32 + HALF) // WRAP) * WRAP

    def observe(self, tick: int, arrival_s: float) -> float:
        """Take one line that was sent at ``tick``; return its lateness in seconds (0 for the fastest)."""
        if self._last_tick is None:
            self._start(tick, arrival_s)
            return 0.0
        self._last_tick, self._last_s = tick, arrival_s
        late_s = arrival_s - self._base_s - (tick - self._base_tick) * self._rate_s
        if late_s < 0.0 and tick < self._settled_tick:
            self._base_s += late_s
        bucket = self._bucket
        assert bucket is not None
        if tick >= bucket[0]:
            self._close(bucket, tick)
            self._bucket = (tick + int(BUCKET_S * self.tick_hz), tick, arrival_s)
        elif arrival_s - bucket[2] < (tick - bucket[1]) * self._rate_s:
            self._bucket = (bucket[0], tick, arrival_s)
        return late_s if late_s > 0.0 else 0.0

    def host_s(self, tick: int) -> float:
        """Return the host's monotonic seconds at which this tick fell."""
        return self._base_s + (tick - self._base_tick) * self._rate_s

    def tick_at(self, now_s: float) -> int:
        """Return the tick that falls at this monotonic time."""
        return self._base_tick + round((now_s - self._base_s) / self._rate_s)

    @property
    def started(self) -> bool:
        """True once a line was observed."""
        return self._last_tick is not None

    @property
    def drift(self) -> float:
        """Relative deviation of the MCU's tick length from nominal by the host's clock, as now in force."""
        return self._rate_s / self._nominal_s - 1.0

    @property
    def anchor(self) -> Anchor | None:
        """The anchor in force."""
        return self._anchor

    def anchor_at(self, now_s: float, utc_ns: int) -> Anchor | None:
        """Compare the wall clock with the anchor in force; return a new anchor where there is none or it stepped."""
        if self._last_tick is None:
            return None
        known = self._anchor
        if known is not None and abs((utc_ns - known.utc_ns) * 1e-9 - (now_s - known.mono_s)) <= STEP_S:
            return None
        self._anchor = Anchor(tick=self.tick_at(now_s), mono_s=now_s, utc_ns=utc_ns)
        return self._anchor

    def utc_ns(self, tick: int) -> int:
        """Return the UTC nanoseconds of a tick under the anchor in force (0 before there is one)."""
        if self._anchor is None:
            return 0
        return self._anchor.utc_ns + round((self.host_s(tick) - self._anchor.mono_s) * 1e9)

    def _start(self, tick: int, arrival_s: float) -> None:
        self._last_tick, self._last_s = tick, arrival_s
        self._base_tick, self._base_s = tick, arrival_s
        self._settled_tick = tick + int(SETTLE_S * self.tick_hz)
        self._bucket = (tick + int(BUCKET_S * self.tick_hz), tick, arrival_s)

    def _close(self, bucket: tuple[int, int, float], tick: int) -> None:
        """Keep the bucket's minimum, fit the envelope, and steer from where the estimate stands now."""
        self._minima = [*self._minima[1 - BUCKETS:], (bucket[1], bucket[2])]
        slope, at_tick, at_s = envelope(self._minima, self._nominal_s)
        here_s = self.host_s(tick)
        error_s = at_s + (tick - at_tick) * slope - here_s
        # rate = slope + error / bucket, bounded: continuous, and never backwards
        bound = CATCH_UP_MAX * self._nominal_s
        correction = error_s / (BUCKET_S * self.tick_hz)
        self._base_tick, self._base_s = tick, here_s
        self._rate_s = slope + max(-bound, min(bound, correction))


def envelope(points: list[tuple[int, float]], nominal_s: float) -> tuple[float, int, float]:
    """Return slope (s per tick) and one point of the line that supports ``points`` from below over their middle.

    ``points`` are (tick, arrival) in rising order of tick.  The slope is bounded by ``DRIFT_MAX``; with one point it
    is nominal.
    """
    t0, a0 = points[0]
    # residuals against the nominal rate keep the arithmetic small whatever the absolute times are
    flat = [(tick - t0, arrival - a0 - (tick - t0) * nominal_s) for tick, arrival in points]
    hull: list[tuple[int, float]] = []
    for x, y in flat:
        while len(hull) > 1 and _above(hull[-2], hull[-1], (x, y)):
            hull.pop()
        hull.append((x, y))
    if len(hull) == 1:
        return nominal_s, t0, a0
    middle = flat[-1][0] / 2
    left, right = next((a, b) for a, b in pairwise(hull) if b[0] >= middle)
    tilt = (right[1] - left[1]) / (right[0] - left[0])
    bound = DRIFT_MAX * nominal_s
    slope = max(-bound, min(bound, tilt))
    x, y = left
    return nominal_s + slope, t0 + x, a0 + x * nominal_s + y


def _above(a: tuple[int, float], b: tuple[int, float], c: tuple[int, float]) -> bool:
    """True when b lies on or above the chord from a to c."""
    return (b[1] - a[1]) * (c[0] - a[0]) >= (c[1] - a[1]) * (b[0] - a[0])
