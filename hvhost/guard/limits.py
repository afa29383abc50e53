"""The one table of limits that the rules compare with: integers in oriented codes and samples, frozen.

Codes are monitor codes above zero (positive in the bench's polarity); words are set-point codes.  ``*_q16`` are
ratios times 65536.  Zero switches a rule off only where its comment says so.
"""

from dataclasses import dataclass
from math import ceil, floor

from hvhost.bench.model import Bench
from hvhost.bench.scaling import Scale
from hvhost.plan.program import HoldStep, Program, RampStep, Step, StepLimits
from hvhost.samples.blocks import Orientation
from hvhost.wire.vocabulary import Fitted, Inputs
from hvhost.words.errors import CommandRefused

Q16 = 1 << 16


@dataclass(frozen=True, slots=True, kw_only=True)
class GuardLimits:
    """Every limit of every rule, for one step of one run."""

    # the chain
    rate_hz: float  # sample pairs per second
    v_map_q16: int  # oriented voltage monitor codes per voltage word code
    i_map_q16: int  # oriented current monitor codes per current word code
    v_limits: tuple[int, int]  # oriented codes at which the voltage converter clips, low and high
    i_limits: tuple[int, int]
    delay_samples: int  # programming delay: the readback follows the words within this
    fall_q16: int  # most that the words may fall in one sample, in voltage monitor codes
    drain_q16: int  # voltage codes per sample that one code of load current can take from output and cable
    # amplitudes
    persist: int = 2  # consecutive samples that an amplitude rule needs; fewer are counted as interfering
    overcurrent: int  # code; above it trips
    arc_wait: bool = False  # an overcurrent waits up to drop_samples for the collapse that would make it an arc
    level: int = 0  # code; above it for level_samples trips; 0 is off
    level_samples: int = 1
    overvoltage: int  # code; above it trips
    # collapse
    drop: int  # codes; an unexplained fall of more than this (D)
    drop_samples: int  # over this many samples (w)
    # plausibility
    zero_band: int  # codes; a readback within this of zero counts as zero, below minus this it is reversed
    i_band: int  # the same for the current readback
    deviation: int = 0  # codes between readback and set-point at rest; 0 is off
    deviation_samples: int = 1  # for this long
    follow_word: int = 0  # rise of the voltage word after which a ramp's readback is checked once; 0 is off
    follow_q16: int = 0  # least share of the set-point's rise that the readback must show then
    saturated_samples: int  # a code at the converter's limit for this long is saturated
    stuck_samples: int = 0  # voltage readback without the least change for this long; 0 is off
    missing_word: int  # voltage word from which a readback at zero, or without change, is missing
    missing_samples: int  # for this long
    # the stream and the contacts
    gap_samples: int  # missing pairs that trip; fewer are an event
    stale_ms: int  # no block for this long is a stale stream
    contacts: int  # Inputs that must be closed while power may be on
    # energy into arcs, in v_code x i_code x samples
    step: int = 0  # a new number starts a new sum
    arc_energy: int = 0  # 0 is off
    stored_q16: int = 0  # energy that one (v_code)^2 of fall takes from output and cable
    # what the texts need
    v_per_code: float
    a_per_code: float

    def __post_init__(self) -> None:
        if not 1 <= self.persist <= 4:
            raise CommandRefused("persist from 1 to 4 samples", str(self.persist), "guard limits")
        for name in ("rate_hz", "overcurrent", "overvoltage", "drop", "drop_samples", "level_samples",
                     "deviation_samples", "saturated_samples", "missing_samples", "gap_samples", "stale_ms"):
            if getattr(self, name) < 1:
                raise CommandRefused("a limit above zero", f"{name} = {getattr(self, name)}", "guard limits")

    def volts(self, code: int) -> str:
        """Return a voltage code as text."""
        return f"{code * self.v_per_code / 1e3:.3f} kV"

    def milliamps(self, code: int) -> str:
        """Return a current code as text."""
        return f"{code * self.a_per_code * 1e3:.4g} mA"

    def seconds(self, samples: int) -> str:
        """Return a number of samples as text."""
        return f"{samples / self.rate_hz:.3g} s"

    def joules(self, codes: int) -> float:
        """Return an energy in v_code x i_code x samples as joules."""
        return codes * self.v_per_code * self.a_per_code / self.rate_hz


FOLLOW_SHARE = 0.05  # the part of a ramp in which the readback must begin to follow
MISSING_SHARE = 0.05  # of the highest voltage: a set-point from which a readback at zero is missing
# The load may draw twice what it drew before (a load step into current limit) from 0.8 of the stated capacitance.
# Chosen on labelled circuit simulations: without it mains dips and crossovers trip by the hundred in two hours; with it
# the host misses one or two of 73 full arcs, of a loaded supply with a large capacitance, which are the MCU's alone.
CAPACITANCE_LEAST = 0.4
CONTACTS: tuple[tuple[Fitted, Inputs], ...] = (
    (Fitted.EMERGENCY, Inputs.EMERGENCY), (Fitted.GROUND_SWITCH, Inputs.GROUND_OPEN),
    (Fitted.GROUND_STICK, Inputs.GROUND_OPEN), (Fitted.AUXILIARY, Inputs.AUXILIARY))


def limits_of(bench: Bench, program: Program | None, step: Step | None, *,
              rate_hz: float | None = None) -> GuardLimits:
    """Return the limits for one step of a program on a bench; without them, the bench's own.

    A step's limits only tighten: each is the lower of the bench's and the step's.  ``rate_hz`` is the greeting's
    sample rate where it is known, else the bench file's.
    """
    rate = rate_hz or bench.rate_hz
    volt, amp = bench.voltage.monitor, bench.current.monitor
    own = bench.limits
    tighter = step.limits if step is not None else StepLimits()

    def samples(seconds: float) -> int:
        return max(1, ceil(seconds * rate))

    trip_a = _least(own.overcurrent_a, tighter.trip_a)
    level_a, level_s = _level(bench, tighter)
    orientation = orientation_of(bench)
    contacts = Inputs.INTERLOCK
    for fitted, contact in CONTACTS:
        contacts |= contact if bench.has(fitted) else Inputs(0)
    fall_v_per_s = max(bench.slew_v_per_s, bench.down_slew_v_per_s)
    return GuardLimits(
        rate_hz=rate,
        v_map_q16=round(abs(bench.voltage.monitor_per_word) * Q16),
        i_map_q16=round(abs(bench.current.monitor_per_word) * Q16),
        v_limits=orientation.oriented_limits(voltage=True), i_limits=orientation.oriented_limits(voltage=False),
        delay_samples=own.delay_samples, fall_q16=ceil(fall_v_per_s / rate / volt.quantum * Q16),
        drain_q16=_drain(bench, rate), persist=own.persist,
        overcurrent=_code(amp, trip_a), arc_wait=program is not None and program.reaction is not None,
        level=_code(amp, level_a), level_samples=samples(level_s),
        overvoltage=_code(volt, _least(own.overvoltage_v, tighter.v_over)),
        drop=_code(volt, own.drop_v), drop_samples=own.drop_samples,
        zero_band=orientation.v_band, i_band=orientation.i_band,
        deviation=_code(volt, own.deviation_v), deviation_samples=samples(own.deviation_s),
        follow_word=_follow_word(bench, program, step), follow_q16=round(own.follow_fraction * Q16),
        saturated_samples=samples(own.missing_s), stuck_samples=samples(own.missing_s),
        missing_word=round(MISSING_SHARE * bench.v_max / bench.voltage.program.quantum),
        missing_samples=samples(own.missing_s), gap_samples=samples(own.gap_s),
        stale_ms=max(1, round(bench.lease_s * 1e3)), contacts=int(contacts),
        step=step.number if step is not None else 0, arc_energy=_energy(bench, tighter.arc_energy_j, rate),
        # C v_code^2 / 2 in units of v_code x a_code x samples
        stored_q16=round(bench.stored_f / 2 * volt.quantum / amp.quantum * rate * Q16),
        v_per_code=volt.quantum, a_per_code=amp.quantum)


def orientation_of(bench: Bench) -> Orientation:
    """Return the orientation that the bench file describes."""
    volt, amp = bench.voltage.monitor, bench.current.monitor
    band = max(1, round(bench.zero_band_v / volt.quantum))
    return Orientation(v_sign=volt.sign, v_zero=volt.code_zero, i_sign=amp.sign, i_zero=amp.code_zero,
                       v_limits=(volt.code_low, volt.code_high), i_limits=(amp.code_low, amp.code_high),
                       v_band=band, i_band=band)


def _least(bench_limit: float, step_limit: float | None) -> float:
    return bench_limit if step_limit is None else min(bench_limit, step_limit)


def _level(bench: Bench, tighter: StepLimits) -> tuple[float, float]:
    """Return level (A) and time (s), each the lower of the bench's and the step's."""
    return (_least(bench.limits.overcurrent_level_a, tighter.level_a),
            _least(bench.limits.overcurrent_level_s, tighter.level_s))


def _code(scale: Scale, value: float) -> int:
    """Return the highest oriented code at or below a value, at least 1."""
    return max(1, floor(value / scale.quantum))


def _drain(bench: Bench, rate_hz: float) -> int:
    """Return how fast one code of load current can discharge output and cable; 0 where no capacitance is stated."""
    if bench.stored_f <= 0.0:
        return 0
    # dv/dt = i / C, per sample and in codes
    volts = bench.current.monitor.quantum / (CAPACITANCE_LEAST * bench.stored_f) / rate_hz
    return ceil(volts / bench.voltage.monitor.quantum * Q16)


def _energy(bench: Bench, joule: float | None, rate_hz: float) -> int:
    if joule is None:
        return 0
    unit = bench.voltage.monitor.quantum * bench.current.monitor.quantum / rate_hz
    return max(1, floor(joule / unit))


def _follow_word(bench: Bench, program: Program | None, step: Step | None) -> int:
    """Return the rise of the voltage word after which following is checked: 5 % of the ramp, well above the zero band.

    A hold and a rest hold the words still, but what precedes them may still be ramping when their limits come into
    force, so the rule stays on with the bench's full range.
    """
    rise_v = bench.v_max
    if isinstance(step, RampStep):
        start_v = 0.0
        for earlier in program.steps if program is not None else ():
            if earlier.number >= step.number:
                break
            start_v = _end_v(earlier, start_v)
        rise_v = abs(step.to_v - start_v)
    least_v = max(FOLLOW_SHARE * rise_v, 4.0 * bench.zero_band_v)
    return max(1, ceil(least_v / bench.voltage.program.quantum))


def _end_v(step: Step, before_v: float) -> float:
    if isinstance(step, RampStep):
        return step.to_v
    return step.v if isinstance(step, HoldStep) else before_v
