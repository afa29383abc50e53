"""A pure function from plan, run sheet and bench to the `Program` that one arm covers.

``compile_plan`` raises FileFault with every finding; ``compiled`` returns them instead, for the preflight.  The
segments of a step are made when it begins, by ``segments_for``: only then are the words known from which it starts.
"""

from collections.abc import Iterator

from hvhost.bench.model import Bench
from hvhost.plan.criteria import criteria_of
from hvhost.plan.plan import Parameter, Plan, PlanPause, PlanRetreat, RunSheet, Window
from hvhost.plan.program import (
    HoldStep,
    Pause,
    Program,
    RampStep,
    RestStep,
    Retreat,
    SpecimenProof,
    Step,
)
from hvhost.plan.segments import segments_for
from hvhost.plan.together import RETREAT_LATEST_S
from hvhost.plan.unroll import Defaults, Unfilled, Unrolled
from hvhost.words.errors import FileFault, QuantityFault
from hvhost.words.findings import Finding, Grade, refused
from hvhost.words.nearest import nearest_word
from hvhost.words.quantities import Dimension, format_quantity, parse_quantity

__all__ = ["compile_plan", "compiled", "direct_program", "filled", "segments_for"]


def compile_plan(plan: Plan, sheet: RunSheet, bench: Bench) -> Program:
    """Return the program; raises FileFault whose ``findings`` name every fault by file and line."""
    program, findings = compiled(plan, sheet, bench)
    if program is None:
        faults = refused(findings)
        raise FileFault("a plan and a run sheet that fit together", f"{len(faults)} faults ({faults[0].text})",
                        plan.file, "'hvhost check' lists them all", findings=findings)
    return program


def compiled(plan: Plan, sheet: RunSheet, bench: Bench) -> tuple[Program | None, tuple[Finding, ...]]:
    """Return the program (None where anything refuses) and every finding."""
    values, findings = filled(plan, sheet)
    walked = Unrolled(plan, values, Defaults(limit_a=bench.i_max, slew_v_per_s=bench.slew_v_per_s))
    walked.walk(plan.steps)
    pause = _pause(walked, plan.pause)
    retreat = _retreat(walked, plan.retreat, pause, bench)
    steps = walked.named_steps()
    acceptance = () if walked.holed else criteria_of(walked)
    every = tuple(dict.fromkeys((*findings, *walked.findings)))
    if refused(every) or not steps:
        return None, every
    return Program(kind="plan", title=plan.title, specimen_kind=plan.specimen_kind, steps=steps, reaction=pause,
                   retreat=retreat, v_highest=max(_volts(step) for step in steps),
                   i_highest=max((step.limit_a for step in steps if not isinstance(step, RestStep)), default=0.0),
                   duration_s=longest_s(steps, pause, retreat, bench), acceptance=acceptance,
                   specimen_proof=_proof(sheet)), every


def direct_program(bench: Bench) -> Program:
    """Return the implicit plan of a direct run: no steps, the bench's ceilings, an arc latches."""
    return Program(kind="direct", title=f"direct run on {bench.name}", steps=(), v_highest=bench.v_max,
                   i_highest=bench.i_max, duration_s=bench.longest_on_s)


# ---------------------------------------------------------------- parameters


def filled(plan: Plan, sheet: RunSheet) -> tuple[dict[str, float], tuple[Finding, ...]]:
    """Return the parameters' values in SI units, and what is wrong with the run sheet's."""
    known = {parameter.name: parameter for parameter in plan.parameters}
    findings = list(_strangers(known, sheet))
    values: dict[str, float] = {}
    for parameter in plan.parameters:
        text = sheet.values.get(parameter.name)
        if text is None and parameter.default is not None:
            values[parameter.name] = parameter.default
        elif text is None:
            findings.append(_fault(sheet, "values", f"a value for '{parameter.name}', {_bounds(parameter)}", "nothing",
                                   f"declared without a default in {plan.file}:{parameter.line}"))
        else:
            _fill(parameter, text, sheet, values, findings)
    return values, tuple(findings)


def _strangers(known: dict[str, Parameter], sheet: RunSheet) -> Iterator[Finding]:
    for name in sheet.values:
        if name not in known:
            near = nearest_word(name, known)
            yield _fault(sheet, f"values.{name}", f"a parameter of the plan ({', '.join(known) or 'it has none'})",
                         f"'{name}'", f"did you mean '{near}'?" if near else "")


def _fill(parameter: Parameter, text: str, sheet: RunSheet, values: dict[str, float], findings: list[Finding]) -> None:
    place = f"values.{parameter.name}"
    try:
        value = parse_quantity(text, parameter.dimension)
    except QuantityFault as fault:
        findings.append(_fault(sheet, place, fault.expected, fault.found, fault.remedy))
        return
    if not parameter.low <= value <= parameter.high:
        findings.append(_fault(sheet, place, _bounds(parameter), f"'{text}'"))
        return
    values[parameter.name] = value


def _bounds(parameter: Parameter) -> str:
    low, high = (format_quantity(value, parameter.dimension) for value in (parameter.low, parameter.high))
    return f"{low} to {high}"


def _fault(sheet: RunSheet, what: str, expected: str, found: str, remedy: str = "") -> Finding:
    line = sheet.lines.get(what) or sheet.lines.get(what.partition(".")[0], 0)
    return Finding(grade=Grade.REFUSE, file=sheet.file, line=line, what=what, expected=expected, found=found,
                   remedy=remedy)


# ---------------------------------------------------------------- reaction and retreat


def _pause(walked: Unrolled, pause: PlanPause | None) -> Pause | None:
    if pause is None:
        return None
    try:
        return Pause(count=int(walked.value(pause.count, "arc.count")), rest_s=walked.value(pause.rest, "arc.rest"),
                     window_s=walked.value(pause.window, "arc.window"))
    except Unfilled:
        return None


def _retreat(walked: Unrolled, retreat: PlanRetreat | None, pause: Pause | None, bench: Bench) -> Retreat | None:
    if retreat is None or pause is None:
        return None
    try:
        rest_s = walked.optional(retreat.rest, "retreat.rest", pause.rest_s)
        back = walked.value(retreat.back, "retreat.back")
        climb = walked.optional(retreat.climb, "retreat.climb", bench.slew_v_per_s)
        series = int(walked.value(retreat.series, "retreat.series"))
    except Unfilled:
        return None
    if not pause.rest_s <= rest_s <= pause.rest_s + RETREAT_LATEST_S:
        line = retreat.rest.line if retreat.rest else retreat.line
        walked.fault(line, "retreat.rest", f"from {pause.rest_s:g} s (the arc reaction's rest) to "
                     f"{pause.rest_s + RETREAT_LATEST_S:g} s, before the pause expires", f"{rest_s:g} s")
    fraction, volts = (back, None) if retreat.back_is_fraction else (None, back)
    return Retreat(rest_s=rest_s, back_fraction=fraction, back_v=volts, climb_v_per_s=climb, series=series)


def _proof(sheet: RunSheet) -> SpecimenProof | None:
    if sheet.capacitance is None and sheet.current is None:
        return None
    line = (sheet.capacitance or sheet.current or Window(low=0.0, high=0.0)).line
    return SpecimenProof(capacitance_f=_ends(sheet.capacitance), current_a=_ends(sheet.current),
                         place=f"{sheet.file}:{line}")


def _ends(window: Window | None) -> tuple[float, float] | None:
    return None if window is None else (window.low, window.high)


# ---------------------------------------------------------------- duration


def _volts(step: Step) -> float:
    if isinstance(step, RampStep):
        return step.to_v
    return step.v if isinstance(step, HoldStep) else 0.0


def longest_s(steps: tuple[Step, ...], pause: Pause | None, retreat: Retreat | None, bench: Bench) -> float:
    """Return the longest time that a program may take with power on.

    Ramps by their nominal duration, holds by ``at_most``, rests with the way down before them, every retreat that the
    series allows, and the last way to zero.
    """
    total, at_v = 0.0, 0.0
    for step in steps:
        if isinstance(step, RampStep):
            total += step.duration_s + _retreats_s(step, pause, retreat)
        elif isinstance(step, HoldStep):
            total += step.at_most_s
        else:
            total += step.rest_s + at_v / bench.down_slew_v_per_s
        at_v = _volts(step)
    return total + min(at_v / bench.down_slew_v_per_s, bench.lower_max_s)


def _retreats_s(step: RampStep, pause: Pause | None, retreat: Retreat | None) -> float:
    """Longest time that the breakdowns of one ramp add: each rests, climbs and ramps again."""
    if pause is None or retreat is None:
        return 0.0
    # The highest breakdown is at the ramp's end; from its retreat on, the ramp is climbed again.
    below = retreat.target(step.to_v)
    again = below / retreat.climb_v_per_s + (step.to_v - below) / step.slew_v_per_s
    return (retreat.series - 1) * (retreat.rest_s + again) + retreat.rest_s


def shown_duration(seconds: float) -> str:
    """A duration in hours, minutes and seconds where it is long, for screens and sentences."""
    if seconds < 120.0:
        return format_quantity(seconds, Dimension.SECOND)
    minutes, rest = divmod(round(seconds), 60)
    hours, minutes = divmod(minutes, 60)
    return f"{hours} h {minutes:02d} min {rest:02d} s" if hours else f"{minutes} min {rest:02d} s"
