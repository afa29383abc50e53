"""Leakage at reading times, and the insulation resistance that goes with it.

The bench's own draw (its divider and cable) flows through the same shunt.  Where META says how large it is, it is
taken off with a standard uncertainty of a tenth of it (common practice, from memory); where it does not, the current
is the whole and says so.  A run without specimen that measures it properly is a matter of the tare.
"""

from dataclasses import dataclass

from hvhost.measure.hold import window_rows
from hvhost.measure.timeline import StepSpan
from hvhost.measure.uncertainty import Value, difference, mean_value, quotient
from hvhost.record.data import RunData

OWN_U = 0.1  # standard uncertainty of a declared own draw, relative
HOLD_START, RAMP_START = "start of hold", "ramp start"


@dataclass(frozen=True, slots=True, kw_only=True)
class Reading:
    """Current and voltage at one reading time; ``amps`` is after the own draw where that is known."""

    number: int
    hold: str
    at_s: float
    origin: str
    taken: bool
    row: int
    window_s: float
    volts: Value | None = None
    amps: Value | None = None
    own_a: float | None = None  # taken off; None: not known, nothing taken off

    @property
    def ohms(self) -> Value | None:
        """V over I, None where the current cannot be told from zero."""
        if self.volts is None or self.amps is None or self.amps.value <= self.amps.expanded:
            return None
        return quotient(self.volts, self.amps)

    @property
    def ohms_at_least(self) -> float | None:
        """The resistance that is certainly there: the voltage less U over the current plus U."""
        if self.volts is None or self.amps is None or self.amps.high <= 0.0:
            return None
        return self.volts.low / self.amps.high


def own_conductance(run: RunData) -> float | None:
    """Conductance that the current monitor sees without a specimen, siemens, None where META does not say."""
    value = run.meta.bench.get("own_s")
    return float(value) if isinstance(value, int | float) else None


def current_over(run: RunData, a: int, b: int) -> tuple[Value, Value, float | None]:
    """Return (volts, amps after own draw, own draw) as means over the rows a to b; at least one must be usable."""
    usable = run.usable(a, b)
    volts = mean_value(run.meta.voltage, run.volts(a, b)[usable])
    amps = mean_value(run.meta.current, run.amps(a, b)[usable])
    own = own_conductance(run)
    if own is None:
        return volts, amps, None
    draw = own * volts.value
    return volts, difference(amps, Value(draw, OWN_U * draw)), draw


def readings_of(run: RunData, spans: tuple[StepSpan, ...]) -> tuple[Reading, ...]:
    """Return every reading that the plan asks for in holds that began, taken or not."""
    return tuple(_reading(run, span, spans, float(at_s)) for span in spans if span.kind == "hold"
                 for at_s in span.step.get("readings_s", ()))


def _origin_row(span: StepSpan, spans: tuple[StepSpan, ...], origin: str) -> int | None:
    if origin == HOLD_START:
        return span.clock
    earlier = [s for s in spans if s.begin <= span.begin]
    if origin == RAMP_START:
        return next((s.begin for s in earlier if s.kind == "ramp"), None)
    return next((s.begin for s in reversed(earlier) if s.name == origin), None)


def _reading(run: RunData, span: StepSpan, spans: tuple[StepSpan, ...], at_s: float) -> Reading:
    origin = str(span.step.get("origin", HOLD_START))
    window_s = span.number_of("window_s", 1.0)
    start = _origin_row(span, spans, origin)
    row, reached = run.rows, False
    blocks = 2 * int(run.head["pairs"].max()) if len(run.head) else 0
    if start is not None and start < run.rows:
        tick = int(run.tick(start, start + 1)[0]) + round(at_s * run.meta.tick_hz)
        row = run.row_of_tick(tick)
        # a record that ends earlier has no row at that tick, and its last one stands for none
        reached = span.end > 0 and tick <= int(run.tick(span.end - 1, span.end)[0]) + blocks * run.meta.sample_ticks
    first = max(span.begin, row - window_rows(run, window_s))
    taken = reached and row <= span.end + blocks and first < min(row, span.end)
    if not taken or not run.usable(first, row).any():
        return Reading(number=span.number, hold=span.name, at_s=at_s, origin=origin, taken=False, row=row,
                       window_s=window_s)
    volts, amps, own = current_over(run, first, min(row, span.end))
    return Reading(number=span.number, hold=span.name, at_s=at_s, origin=origin, taken=True, row=row,
                   window_s=window_s, volts=volts, amps=amps, own_a=own)
