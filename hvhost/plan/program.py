"""What a run executes: unrolled steps in SI units, their limits, the arc reaction and what is to be judged after.

A `Program` is made by ``compiler.compile_plan`` (a plan run) or ``compiler.direct_program`` (set-points by hand) and
holds no parameter, no repeat and no reference any more.  All volts and amps are oriented magnitudes: positive in the
direction of the bench's polarity.
"""

from collections.abc import Iterator
from dataclasses import dataclass, field
from enum import StrEnum

RAMP_START, HOLD_START = "ramp start", "start of hold"
WINDOW_S = 1.0  # the tolerance is judged on the mean over this window unless a plan states another


class HoldClock(StrEnum):
    """How the time of a hold counts."""

    CONTINUOUS = "continuous"  # one unbroken stretch inside the tolerance
    ACCUMULATE = "accumulate"  # the sum of the stretches inside the tolerance


class WhenOut(StrEnum):
    """What a continuous clock does when the mean leaves the tolerance."""

    FAIL = "fail"
    RESTART = "restart"


class SpecimenKind(StrEnum):
    """Whether insulation recovers after a breakdown."""

    SELF_RESTORING = "self-restoring"
    NOT_SELF_RESTORING = "not self-restoring"


class CriterionKind(StrEnum):
    """What may be asked of a run."""

    NO_BREAKDOWN = "no breakdown"  # no disruptive discharge in the whole run
    LEVEL_HELD = "level held"  # mean over a hold at least the level less its tolerance, limit in V
    LEAKAGE_BELOW = "leakage below"  # limit in A, at a reading time or at every reading
    RESISTANCE_ABOVE = "resistance above"  # limit in ohm, at a reading time or at every reading
    BREAKDOWN_ABOVE = "breakdown above"  # every breakdown voltage of the run, limit in V


@dataclass(frozen=True, slots=True, kw_only=True)
class StepLimits:
    """Limits of one step, tighter than the bench's; None leaves the bench's limit in force."""

    trip_a: float | None = None  # overcurrent, at once
    level_a: float | None = None  # overcurrent for `level_s`
    level_s: float | None = None
    v_over: float | None = None  # overvoltage, V
    arc_energy_j: float | None = None  # energy fed into arcs during the step


@dataclass(frozen=True, slots=True, kw_only=True)
class RampStep:
    """Raises or lowers the set-point at a constant rate; ``limit_a`` is the current word while it lasts.

    With ``until_breakdown`` a breakdown ends the step as wanted; reaching ``to_v`` without one ends it too.
    """

    number: int
    name: str
    place: str
    limits: StepLimits = field(default_factory=StepLimits)
    to_v: float
    slew_v_per_s: float
    limit_a: float
    until_breakdown: bool = False
    duration_s: float = 0.0  # nominal, from the step before; a climb after a retreat takes its own time


@dataclass(frozen=True, slots=True, kw_only=True)
class HoldStep:
    """Keeps ``v`` until the clock has counted ``hold_s``, ends in any case ``at_most_s`` after its start (pauses too).

    The clock runs while the mean of the readback over ``window_s`` lies within ``tolerance`` (a fraction) of ``v``.
    ``readings_s`` count from ``origin``: 'start of hold' (the clock's start), 'ramp start' (first segment of the run),
    or the name of an earlier step (its start).
    """

    number: int
    name: str
    place: str
    limits: StepLimits = field(default_factory=StepLimits)
    v: float
    limit_a: float
    hold_s: float
    clock: HoldClock = HoldClock.CONTINUOUS
    at_most_s: float
    tolerance: float
    window_s: float = WINDOW_S
    when_out: WhenOut = WhenOut.FAIL
    readings_s: tuple[float, ...] = ()
    origin: str = HOLD_START
    guard_band: bool = False


@dataclass(frozen=True, slots=True, kw_only=True)
class RestStep:
    """Waits ``rest_s`` at zero volts; the words first go there at the bench's down-slew where they stand higher."""

    number: int
    name: str
    place: str
    limits: StepLimits = field(default_factory=StepLimits)
    rest_s: float


Step = RampStep | HoldStep | RestStep


@dataclass(frozen=True, slots=True, kw_only=True)
class Pause:
    """Arc reaction: an arc pauses the run; more than ``count`` in any sliding ``window_s`` latch."""

    count: int
    rest_s: float
    window_s: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Retreat:
    """What the plan does after an arc pause: rest, climb to below the breakdown, go on with the step.

    The climb ends at ``(1 - back_fraction)`` of the breakdown voltage, or ``back_v`` below it (one of the two is
    None), never below zero.  ``series`` breakdowns of a step end it: a ramp until breakdown is then done, any other
    step has failed and the run lowers.
    """

    rest_s: float
    back_fraction: float | None = None
    back_v: float | None = None
    climb_v_per_s: float
    series: int

    def target(self, v_breakdown: float) -> float:
        """Return the voltage at which the climb ends and the step goes on."""
        if self.back_v is not None:
            return max(0.0, v_breakdown - self.back_v)
        return max(0.0, v_breakdown * (1.0 - (self.back_fraction or 0.0)))


@dataclass(frozen=True, slots=True, kw_only=True)
class Criterion:
    """One acceptance criterion; ``limit`` in the unit of its kind (0 for 'no breakdown')."""

    kind: CriterionKind
    limit: float = 0.0
    hold: str = ""  # name of the hold it is judged on; '' is every hold
    reading_s: float | None = None  # None: every reading of the hold
    tolerance: float = 0.0  # LEVEL_HELD only: the fraction the mean may lie below the level
    guard_band: bool = False  # LEVEL_HELD only: judge with a guard band where the plan asks
    place: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class SpecimenProof:
    """The window that proves that a specimen was connected: capacitance from the ramp, current in the hold, or both."""

    capacitance_f: tuple[float, float] | None = None
    current_a: tuple[float, float] | None = None
    place: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Program:
    """Everything that one arm covers."""

    kind: str  # 'plan' or 'direct'
    title: str
    specimen_kind: SpecimenKind = SpecimenKind.NOT_SELF_RESTORING
    steps: tuple[Step, ...]
    reaction: Pause | None = None  # None: an arc latches
    retreat: Retreat | None = None
    v_highest: float
    i_highest: float
    duration_s: float  # longest time on, pauses and retreats included
    acceptance: tuple[Criterion, ...] = ()
    specimen_proof: SpecimenProof | None = None  # None: nothing was declared, a pass is not possible

    def holds(self) -> Iterator[HoldStep]:
        """Yield the holds in order."""
        return (step for step in self.steps if isinstance(step, HoldStep))


@dataclass(frozen=True, slots=True, kw_only=True)
class SegmentTarget:
    """One segment as the wire carries it: target words of both channels and the ticks to get there (at least 1)."""

    v: int
    i: int
    ticks: int
