"""A plan and a run sheet as written: steps that may still name parameters, and the values that fill them.

Nothing here knows a bench.  ``language.load_plan`` and ``sheet.load_sheet`` make these from text; ``line`` counts from
1 and ``file`` is the name that findings show.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import date

from hvhost.plan.program import CriterionKind, HoldClock, SpecimenKind, WhenOut
from hvhost.words.findings import Finding
from hvhost.words.quantities import Dimension, format_quantity


@dataclass(frozen=True, slots=True, kw_only=True)
class Value:
    """A value of the plan: a quantity, a declared parameter, or a fraction of one.

    It stands for ``factor * parameter``, or for ``factor`` alone where ``parameter`` is empty; SI units.
    ``dimension`` is that of the value, ``needs`` that of the parameter.  ``low`` and ``high`` are inclusive bounds,
    ``above`` an exclusive one.
    """

    factor: float
    parameter: str = ""
    dimension: Dimension
    needs: Dimension
    low: float | None = None
    above: float | None = None
    high: float | None = None
    line: int = 0

    def of(self, values: Mapping[str, float]) -> float:
        """Return the SI value with the parameters filled in; raises KeyError for one that is not."""
        return self.factor * values[self.parameter] if self.parameter else self.factor

    def outside(self, value: float) -> str:
        """Return the bound that a value breaks, in words; '' where it keeps all."""
        if self.low is not None and value < self.low:
            return f"at least {format_quantity(self.low, self.dimension)}"
        if self.above is not None and value <= self.above:
            return f"more than {format_quantity(self.above, self.dimension)}"
        if self.high is not None and value > self.high:
            return f"at most {format_quantity(self.high, self.dimension)}"
        return ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Parameter:
    """A declared parameter: its dimension, its bounds (inclusive, SI) and what fills it when the sheet does not."""

    name: str
    dimension: Dimension
    low: float
    high: float
    default: float | None
    line: int


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanLimits:
    """Limits of a step or, at the head of a plan, of every step that does not state its own."""

    trip: Value | None = None  # A
    level: Value | None = None  # A
    level_time: Value | None = None  # s
    overvoltage: Value | None = None  # V
    arc_energy: Value | None = None  # J


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanRamp:
    """Ramp to a voltage at a rate or in a duration (one of the two is None)."""

    line: int
    name: str
    to: Value
    rate: Value | None
    duration: Value | None
    until_breakdown: bool
    current_limit: Value | None
    limits: PlanLimits


@dataclass(frozen=True, slots=True, kw_only=True)
class HoldTerms:
    """How a hold, or every hold of a staircase, is timed, judged and read."""

    hold: Value  # s
    at_most: Value  # s
    clock: HoldClock = HoldClock.CONTINUOUS
    when_out: WhenOut = WhenOut.FAIL
    tolerance: Value | None = None  # fraction; None: IEC 60060-1 by duration
    window: Value | None = None  # s; None: 1 s
    readings: tuple[Value, ...] = ()
    origin: str = ""
    origin_line: int = 0
    guard_band: bool = False


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanHold:
    """Hold at the voltage reached."""

    line: int
    name: str
    terms: HoldTerms
    current_limit: Value | None
    limits: PlanLimits


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanStaircase:
    """Equal steps from ``start`` to ``to``, each a ramp at ``rate`` and a hold; the last step ends at ``to``."""

    line: int
    name: str
    start: Value
    to: Value
    step: Value
    rate: Value | None  # None: as fast as the bench may
    terms: HoldTerms
    current_limit: Value | None
    limits: PlanLimits


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanRest:
    """Wait with the words where they are."""

    line: int
    name: str
    rest: Value


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanRepeat:
    """Steps to be done several times over."""

    line: int
    name: str
    times: Value
    steps: tuple["PlanStep", ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanGap:
    """Stands where a faulty step was told already, so that the steps around it can be checked all the same."""

    line: int
    name: str = ""


PlanStep = PlanRamp | PlanHold | PlanStaircase | PlanRest | PlanRepeat | PlanGap


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanPause:
    """The arc reaction *pause* as written."""

    count: Value
    rest: Value
    window: Value
    line: int


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanRetreat:
    """The retreat as written; ``back`` is a fraction where ``back_is_fraction``, else volts."""

    rest: Value | None
    back: Value
    back_is_fraction: bool
    climb: Value | None
    series: Value
    line: int


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanCriterion:
    """One acceptance criterion as written."""

    kind: CriterionKind
    limit: Value | None
    hold: str
    at: Value | None
    tolerance: Value | None
    guard_band: bool
    line: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Release:
    """Who released the plan, and when."""

    by: str
    on: date
    line: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """One plan file, checked by itself; ``findings`` are its remarks (a plan that refuses is never built)."""

    file: str
    text: str
    sha256: str
    title: str
    specimen_kind: SpecimenKind
    release: Release | None
    parameters: tuple[Parameter, ...]
    current_limit: Value | None
    limits: PlanLimits
    pause: PlanPause | None
    retreat: PlanRetreat | None
    steps: tuple[PlanStep, ...]
    acceptance: tuple[PlanCriterion, ...]
    findings: tuple[Finding, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Window:
    """A declared window, SI, both ends inclusive."""

    low: float
    high: float
    line: int = 0


@dataclass(frozen=True, slots=True, kw_only=True)
class Confirmations:
    """What the operator states about the set-up; None where the sheet does not say."""

    polarity: int | None = None  # +1 or -1, as set at the supply
    ground_removed: bool | None = None
    grounded_while_connecting: bool | None = None
    area_clear: bool | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Environment:
    """Temperature in °C, relative humidity as a fraction, pressure in Pa; None where not measured."""

    temperature_c: float | None = None
    humidity: float | None = None
    pressure_pa: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class RunSheet:
    """What is entered for one run.

    ``values`` are the texts for the plan's parameters by name, with their lines (a sheet alone does not know their
    dimensions); ``lines`` gives the line of each key by dotted path.
    """

    file: str
    text: str
    sha256: str
    title: str
    specimen: str
    order: str = ""
    operator: str = ""
    second_person: str = ""
    specimen_data: Mapping[str, str] = field(default_factory=dict)
    environment: Environment = Environment()
    values: Mapping[str, str] = field(default_factory=dict)
    capacitance: Window | None = None
    current: Window | None = None
    confirmed: Confirmations = Confirmations()
    repeat_of: str = ""  # why a used specimen ID is used again
    remarks: str = ""
    lines: Mapping[str, int] = field(default_factory=dict)
    findings: tuple[Finding, ...] = ()

