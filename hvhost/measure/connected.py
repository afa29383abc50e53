"""Proof that a specimen was connected: capacitance from a ramp, or current in a hold, inside the declared window.

Theory.  While the voltage rises, I = C dV/dt + V / R.  At a constant rate the first term is a constant and the second
a slope over V, so one straight line through (V, I) gives both: C = intercept / rate and 1/R = slope.  The intercept
carries the current monitor's zero uncertainty, which no number of samples removes.  What the bench draws by itself is
taken off before a window is looked at.

A window proves nothing unless an open lead would fall outside it, so the measured value must also differ from zero by
more than its uncertainty.
"""

from dataclasses import dataclass
from math import hypot, sqrt

import numpy as np

from hvhost.measure.cameoff import came_off
from hvhost.measure.leakage import OWN_U, current_over, own_conductance
from hvhost.measure.timeline import StepSpan, program_of
from hvhost.measure.uncertainty import Value, difference
from hvhost.record.data import RunData

BINS = 40  # the ramp is averaged to this many points before the line is fitted
ROWS_MIN = 64
TRIM = (0.10, 0.95)  # part of the ramp that is used: the lag of the first moments and the end are left out


@dataclass(frozen=True, slots=True, kw_only=True)
class RampResult:
    """Capacitance and parallel resistance seen in one ramp, the bench's own capacitance taken off where known."""

    number: int
    name: str
    rate_v_per_s: float
    farads: Value
    siemens: Value
    own_f: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Proof:
    """Whether the specimen was seen, and the sentence that says why."""

    seen: bool
    text: str


def line_fit(x: np.ndarray, y: np.ndarray) -> tuple[float, float, float, float]:
    """Unweighted straight line y = a + b x (at least 3 points): (a, b, u(a), u(b)), as in JCGM 100, H.3."""
    n, mean = len(x), float(x.mean())
    spread = float(((x - mean) ** 2).sum())
    b = float(((x - mean) * y).sum()) / spread
    a = float(y.mean()) - b * mean
    s = sqrt(float(((y - a - b * x) ** 2).sum()) / (n - 2))
    return a, b, s * sqrt(1.0 / n + mean**2 / spread), s / sqrt(spread)


def measure_ramp(run: RunData, span: StepSpan) -> RampResult | None:
    """Measure one ramp; None where it is too short, too flat or too little of it is usable."""
    rows = span.end - span.begin
    a, b = span.begin + int(TRIM[0] * rows), span.begin + int(TRIM[1] * rows)
    usable = run.usable(a, b)
    if int(usable.sum()) < ROWS_MIN:
        return None
    t, v, i = run.seconds(a, b)[usable], run.volts(a, b)[usable], run.amps(a, b)[usable]
    _, rate, _, u_rate = line_fit(t, v)
    if abs(rate) < 1.0 or abs(rate) < 10.0 * u_rate or float(np.ptp(v)) <= 0.0:
        return None
    count = min(BINS, len(v) // 8)
    bins = [(float(p.mean()), float(q.mean())) for p, q in zip(np.array_split(v, count), np.array_split(i, count),
                                                               strict=True)]
    x, y = np.array([p for p, _ in bins]), np.array([q for _, q in bins])
    intercept, slope, u_intercept, u_slope = line_fit(x, y)
    scale = run.meta.current
    capacitance = intercept / rate
    # C = I0 / rate: zero of the current monitor, scatter of the fit, gains of both monitors
    u_c = sqrt((scale.u_zero / rate) ** 2 + (u_intercept / rate) ** 2
               + (capacitance * hypot(scale.u_gain, run.meta.voltage.u_gain)) ** 2)
    own = run.meta.bench.get("own_f")
    farads = Value(capacitance, u_c)
    if isinstance(own, int | float):
        farads = difference(farads, Value(float(own), OWN_U * float(own)))
    return RampResult(number=span.number, name=span.name, rate_v_per_s=rate, farads=farads,
                      siemens=Value(slope, hypot(u_slope, slope * scale.u_gain)),
                      own_f=float(own) if isinstance(own, int | float) else None)


def best_ramp(run: RunData, spans: tuple[StepSpan, ...]) -> RampResult | None:
    """Return the ramp whose capacitance is known best."""
    found = [r for span in spans if span.kind == "ramp" and (r := measure_ramp(run, span)) is not None]
    return min(found, key=lambda r: r.farads.u, default=None)


def proof_of(run: RunData, spans: tuple[StepSpan, ...], ramp: RampResult | None) -> Proof:
    """Judge every window that the run sheet declares; all of them must be met."""
    declared = program_of(run).get("specimen_proof") or {}
    parts: list[Proof] = []
    if declared.get("capacitance_f"):
        parts.append(_capacitance(tuple(declared["capacitance_f"]), ramp))
    if declared.get("current_a"):
        parts.append(_current(run, spans, tuple(declared["current_a"])))
    if not parts:
        return Proof(seen=False, text="no specimen seen: the run sheet declares no window for it")
    lost = came_off(run, spans)
    if lost:
        parts.append(Proof(seen=False, text=f"perhaps no specimen to the end: {lost}"))
    return Proof(seen=all(p.seen for p in parts), text="; ".join(p.text for p in parts))


def _capacitance(window: tuple[float, float], ramp: RampResult | None) -> Proof:
    if ramp is None:
        return Proof(seen=False, text="no specimen seen: no ramp from which a capacitance could be taken")
    return _judged(ramp.farads, window, 1e12, "pF", f"capacitance in the ramp {ramp.name!r}",
                   ramp.own_f is not None)


def _current(run: RunData, spans: tuple[StepSpan, ...], window: tuple[float, float]) -> Proof:
    holds = [s for s in spans if s.kind == "hold" and s.end > s.begin]
    if not holds:
        return Proof(seen=False, text="no specimen seen: no hold in which a current could be taken")
    span = max(holds, key=lambda s: s.number_of("v"))
    start = span.clock if span.clock is not None and span.clock < span.end else span.begin
    if not run.usable(start, span.end).any():
        return Proof(seen=False, text="no specimen seen: no usable sample in the hold")
    _, amps, _ = current_over(run, start, span.end)
    return _judged(amps, window, 1e6, "µA", f"current in the hold {span.name!r}", own_conductance(run) is not None)


def _two_figures(value: float) -> str:
    """An uncertainty, two figures without an exponent where it is one of everyday's size."""
    return f"{float(f'{value:.2g}'):.4g}"


def _judged(value: Value, window: tuple[float, float], factor: float, unit: str, what: str, own_known: bool) -> Proof:
    shown = f"{what} {value.value * factor:.4g} {unit} ± {_two_figures(value.expanded * factor)} {unit}"
    limits = f"the declared {window[0] * factor:.4g} to {window[1] * factor:.4g} {unit}"
    if not own_known:
        return Proof(seen=False, text=f"no specimen seen: {shown}, but the bench's own draw is not known")
    if value.low <= 0.0:
        return Proof(seen=False, text=f"no specimen seen: {shown} cannot be told from an open lead")
    if not window[0] <= value.value <= window[1]:
        return Proof(seen=False, text=f"no specimen seen: {shown} is outside {limits}")
    return Proof(seen=True, text=f"specimen seen: {shown}, inside {limits}")
