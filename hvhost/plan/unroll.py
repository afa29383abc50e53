"""From a plan with its parameters filled to a flat row of steps: repeats done, staircases climbed, voltages followed.

The same walk serves twice: with the values of a run sheet it makes the steps of a program; with the ends of every
parameter's bounds it finds what is wrong with a plan for any value.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

from hvhost.plan.plan import (
    HoldTerms,
    Plan,
    PlanGap,
    PlanHold,
    PlanLimits,
    PlanRamp,
    PlanRepeat,
    PlanRest,
    PlanStaircase,
    PlanStep,
    Value,
)
from hvhost.plan.program import (
    HOLD_START,
    RAMP_START,
    WINDOW_S,
    HoldStep,
    RampStep,
    RestStep,
    Step,
    StepLimits,
)
from hvhost.words.findings import Finding, Grade
from hvhost.words.nearest import nearest_word
from hvhost.words.quantities import Dimension, format_quantity

STEPS_MOST = 2000  # unrolled; more is a slip of the pen and would fill the record with markers


class Unfilled(Exception):
    """A value is not there and the reason has been told elsewhere."""


def iec_tolerance(hold_s: float) -> float:
    """Tolerance of a direct test voltage as a fraction: 1 % up to 60 s, 3 % beyond (IEC 60060-1:2010)."""
    return 0.01 if hold_s <= 60.0 else 0.03


@dataclass(frozen=True, slots=True, kw_only=True)
class Defaults:
    """What stands where a plan says nothing: the bench's current limit and slew."""

    limit_a: float
    slew_v_per_s: float


@dataclass(slots=True)
class Item:
    """One unrolled step: the name it was written under, its nominal start, the index its readings count from."""

    base: str
    step: Step
    start_s: float | None
    origin: int | None = None


@dataclass(slots=True)
class Unrolled:
    """The walk's state and result; ``at_v`` is None where a fault has hidden the voltage that stands."""

    plan: Plan
    values: Mapping[str, float]
    defaults: Defaults
    items: list[Item] = field(default_factory=list)
    findings: list[Finding] = field(default_factory=list)
    at_v: float | None = 0.0
    at_s: float | None = 0.0
    after_breakdown: bool = False
    holed: bool = False
    declared: Mapping[str, Dimension] = field(init=False)

    def __post_init__(self) -> None:
        self.declared = {parameter.name: parameter.dimension for parameter in self.plan.parameters}

    def fault(self, line: int, what: str, expected: str, found: str, remedy: str = "") -> None:
        """Note a fault that refuses."""
        self.findings.append(Finding(grade=Grade.REFUSE, file=self.plan.file, line=line, what=what, expected=expected,
                                     found=found, remedy=remedy))

    def value(self, value: Value, what: str) -> float:
        """Return the SI value, its bound checked; raises `Unfilled`."""
        if value.parameter and self.declared.get(value.parameter) is not value.needs:
            raise Unfilled(value.parameter)  # undeclared or of another dimension: told with the references
        try:
            number = value.of(self.values)
        except KeyError:
            raise Unfilled(value.parameter) from None
        broken = value.outside(number)
        if broken:
            self.fault(value.line, what, broken, f"{format_quantity(number, value.dimension)} ('{value.parameter}')")
            raise Unfilled(what)
        return number

    def optional(self, value: Value | None, what: str, default: float) -> float:
        """Return the SI value, or the default where none is written."""
        return default if value is None else self.value(value, what)

    # ------------------------------------------------------------ the walk

    def walk(self, steps: tuple[PlanStep, ...]) -> None:
        """Unroll a list of steps."""
        for step in steps:
            if len(self.items) > STEPS_MOST:
                return
            try:
                self._one(step)
            except Unfilled:
                self._lost()

    def _lost(self) -> None:
        self.at_v, self.at_s, self.holed = None, None, True

    def _one(self, step: PlanStep) -> None:
        if isinstance(step, PlanRamp):
            self._ramp(step)
        elif isinstance(step, PlanHold):
            self._hold(step.line, step.name or "hold", step.terms, step.current_limit, step.limits)
        elif isinstance(step, PlanStaircase):
            self._staircase(step)
        elif isinstance(step, PlanRest):
            self._rest(step)
        elif isinstance(step, PlanRepeat):
            for _ in range(int(self.value(step.times, "times"))):
                self.walk(step.steps)
        elif isinstance(step, PlanGap):
            self._lost()

    def _add(self, base: str, step: Step, nominal_s: float | None) -> None:
        if len(self.items) == STEPS_MOST:
            line = int(step.place.rpartition(":")[2])
            self.fault(line, "steps", f"at most {STEPS_MOST} steps when repeats are written out", "more")
        self.items.append(Item(base, step, self.at_s))
        self.at_s = None if self.at_s is None or nominal_s is None else self.at_s + nominal_s

    def _place(self, line: int) -> str:
        return f"{self.plan.file}:{line}"

    def _limits(self, own: PlanLimits) -> StepLimits:
        shared = self.plan.limits

        def of(name: str) -> float | None:
            value: Value | None = getattr(own, name) or getattr(shared, name)
            return None if value is None else self.value(value, f"limits.{name}")

        return StepLimits(trip_a=of("trip"), level_a=of("level"), level_s=of("level_time"), v_over=of("overvoltage"),
                          arc_energy_j=of("arc_energy"))

    def _limit_a(self, own: Value | None) -> float:
        return self.optional(own or self.plan.current_limit, "current_limit", self.defaults.limit_a)

    def _ramp(self, step: PlanRamp) -> None:
        to_v, start = self.value(step.to, "to"), self.at_v
        if step.until_breakdown and (to_v == 0.0 or (start is not None and to_v <= start)):
            self.fault(step.line, "ramp until breakdown", f"a voltage above the {_volts(start or 0.0)} before it",
                       _volts(to_v))
        if start is not None and to_v == start and not self.after_breakdown:
            self.fault(step.line, "ramp", f"a voltage other than the {_volts(start)} that stands already", _volts(to_v))
        self._move(step.line, step.name or "ramp", to_v, self._slew(step, to_v), step.current_limit, step.limits,
                   step.until_breakdown)

    def _slew(self, step: PlanRamp, to_v: float) -> float:
        if step.rate is not None:
            return self.value(step.rate, "rate")
        if step.duration is None:
            raise Unfilled("rate")  # told by the builder
        duration = self.value(step.duration, "duration")
        if self.after_breakdown:
            self.fault(step.line, "ramp", "'rate' (after a ramp until breakdown nobody knows where it begins)",
                       "'duration'")
            raise Unfilled("duration")
        if self.at_v is None:
            raise Unfilled("duration")
        return abs(to_v - self.at_v) / duration or self.defaults.slew_v_per_s

    def _move(self, line: int, base: str, to_v: float, slew: float, limit: Value | None, limits: PlanLimits,
              until: bool = False) -> None:
        """Add a ramp from where the voltage stands (after a breakdown: from zero, if that takes longer)."""
        start = self.at_v or 0.0
        far = max(abs(to_v - start), to_v) if self.after_breakdown else abs(to_v - start)
        duration = far / slew
        self._add(base, RampStep(number=len(self.items), name=base, place=self._place(line), to_v=to_v,
                                 slew_v_per_s=slew, limit_a=self._limit_a(limit), limits=self._limits(limits),
                                 until_breakdown=until, duration_s=duration),
                  None if self.at_v is None else duration)
        self.at_v, self.after_breakdown = to_v, until

    def _rest(self, step: PlanRest) -> None:
        rest_s = self.value(step.rest, "rest")
        self._add("rest", RestStep(number=len(self.items), name="rest", place=self._place(step.line), rest_s=rest_s),
                  rest_s)
        self.at_v, self.after_breakdown = 0.0, False

    def _staircase(self, step: PlanStaircase) -> None:
        start, to_v, rise = (self.value(step.start, "from"), self.value(step.to, "to"), self.value(step.step, "step"))
        if to_v <= start:
            self.fault(step.to.line, "staircase", f"'to' above 'from' ({_volts(start)})", _volts(to_v))
            raise Unfilled("to")
        if (to_v - start) / rise > STEPS_MOST:
            self.fault(step.step.line, "staircase", f"at most {STEPS_MOST} steps", f"steps of {_volts(rise)}")
            raise Unfilled("step")
        if self.at_v is not None and self.at_v >= start and not self.after_breakdown:
            self.fault(step.start.line, "staircase", f"a start above the {_volts(self.at_v)} before it", _volts(start))
        base = step.name or "staircase"
        slew = self.optional(step.rate, "rate", self.defaults.slew_v_per_s)
        for level in levels(start, to_v, rise):
            self._move(step.line, f"{base}_ramp", level, slew, step.current_limit, step.limits)
            self._hold(step.line, base, step.terms, step.current_limit, step.limits)

    def _hold(self, line: int, base: str, terms: HoldTerms, limit: Value | None, limits: PlanLimits) -> None:
        hold_s, at_most = self.value(terms.hold, "for"), self.value(terms.at_most, "at_most")
        window = self.optional(terms.window, "window", WINDOW_S)
        if at_most < hold_s:
            self.fault(terms.at_most.line, "at_most", f"at least the hold's {_seconds(hold_s)}", _seconds(at_most))
        if window > hold_s:
            self.fault(terms.window.line if terms.window else line, "window",
                       f"at most the hold's {_seconds(hold_s)}", _seconds(window),
                       "" if terms.window else "state a shorter 'window'")
        volts = self._held(line)
        readings = tuple(self.value(value, "readings") for value in terms.readings)
        origin, name = self._origin(terms)
        self._check_readings(terms, readings, origin, name, hold_s)
        tolerance = self.optional(terms.tolerance, "tolerance", iec_tolerance(hold_s))
        self._add(base, HoldStep(number=len(self.items), name=base, place=self._place(line), v=volts,
                                 limit_a=self._limit_a(limit), limits=self._limits(limits), hold_s=hold_s,
                                 clock=terms.clock, at_most_s=at_most, tolerance=tolerance, window_s=window,
                                 when_out=terms.when_out, readings_s=readings, origin=name,
                                 guard_band=terms.guard_band), hold_s)
        self.items[-1].origin = origin

    def _held(self, line: int) -> float:
        if self.at_v is None:
            return 0.0
        if self.at_v == 0.0:
            self.fault(line, "hold", "a voltage to hold, reached by a ramp before it", "0 V")
        if self.after_breakdown and self.plan.pause is not None:
            self.fault(line, "hold", "a ramp that reaches a voltage before a hold", "a ramp until breakdown",
                       "ramp to the voltage first")
        return self.at_v

    # ------------------------------------------------------------ reading times

    def _origin(self, terms: HoldTerms) -> tuple[int | None, str]:
        """Return the index of the step that the readings count from (None: this hold's own start) and the words."""
        if terms.origin in ("", HOLD_START):
            return None, HOLD_START
        if terms.origin == RAMP_START:
            return 0, RAMP_START
        for at in range(len(self.items) - 1, -1, -1):
            if self.items[at].base == terms.origin:
                return at, terms.origin
        if not self.holed:
            known = [HOLD_START, RAMP_START, *dict.fromkeys(item.base for item in self.items)]
            near = nearest_word(terms.origin, known)
            self.fault(terms.origin_line, "origin", f"'{HOLD_START}', '{RAMP_START}' or the name of a step before it",
                       f"'{terms.origin}'", f"did you mean '{near}'?" if near else "")
        return None, HOLD_START

    def _check_readings(self, terms: HoldTerms, readings: tuple[float, ...], origin: int | None, name: str,
                        hold_s: float) -> None:
        begin = 0.0
        if origin is not None:
            origin_s = self.items[origin].start_s if self.items else 0.0
            if origin_s is None or self.at_s is None:
                return
            begin = self.at_s - origin_s
        end, before, slack = begin + hold_s, -1.0, 1e-9 * (begin + hold_s)
        for value, time_s in zip(terms.readings, readings, strict=True):
            if not begin - slack <= time_s <= end + slack:
                self.fault(value.line, "readings", f"times within the hold, {_seconds(begin)} to {_seconds(end)} after "
                           f"the {name}", _seconds(time_s))
            elif time_s <= before:
                self.fault(value.line, "readings", f"times that rise (the one before is {_seconds(before)})",
                           _seconds(time_s))
            before = time_s

    # ------------------------------------------------------------ names

    def named_steps(self) -> tuple[Step, ...]:
        """Return the steps under names of their own: a base used more than once is numbered from 1."""
        total: dict[str, int] = {}
        for item in self.items:
            total[item.base] = total.get(item.base, 0) + 1
        seen: dict[str, int] = {}
        for item in self.items:
            seen[item.base] = seen.get(item.base, 0) + 1
            number = f" {seen[item.base]}" if total[item.base] > 1 else ""
            item.step = replace(item.step, name=item.base + number)
        for item in self.items:
            if item.origin is not None and isinstance(item.step, HoldStep) and item.step.origin != RAMP_START:
                item.step = replace(item.step, origin=self.items[item.origin].step.name)
        return tuple(item.step for item in self.items)


def levels(start: float, to_v: float, rise: float) -> tuple[float, ...]:
    """Return the levels of a staircase: ``start``, ``start + rise`` ... and ``to_v`` last, however short its step."""
    # A remainder below a millionth of a step is rounding, not a step.
    whole = int((to_v - start) / rise + 1e-6)
    rising = [start + rise * at for at in range(whole + 1)]
    if to_v - rising[-1] > 1e-6 * rise:
        return (*rising, to_v)
    return (*rising[:-1], to_v)


def _volts(value: float) -> str:
    return format_quantity(value, Dimension.VOLT, digits=6)


def _seconds(value: float) -> str:
    return format_quantity(value, Dimension.SECOND, digits=6)
