"""What must fit together in a plan: references, reaction and retreat, names, criteria, the walk through its steps."""

from collections.abc import Callable
from dataclasses import fields, is_dataclass, replace
from typing import Any

from hvhost.plan.criteria import ON_HOLDS, criteria_of
from hvhost.plan.plan import Plan, PlanGap, PlanHold, PlanRamp, PlanRepeat, PlanStaircase, PlanStep, Value
from hvhost.plan.program import CriterionKind, SpecimenKind
from hvhost.plan.unroll import Defaults, Unrolled
from hvhost.words.findings import Finding, Grade
from hvhost.words.nearest import nearest_word
from hvhost.words.quantities import Dimension, format_quantity
from hvhost.words.textfile import Node

# The MCU waits this long after the rest of a pause for the first segment, then cuts (PROTOCOL.md, arc reaction).
PAUSE_EXPIRES_S = 30.0
# A retreat must send its first segment well before that: the host needs a round trip and may have been slow once.
RETREAT_LATEST_S = 20.0

Fault = Callable[..., None]


def faults_together(plan: Plan, root: Node) -> tuple[Finding, ...]:
    """Return what does not fit together in a plan as far as it could be read; ``root`` is the tree of its file."""
    found: list[Finding] = []

    def fault(line: int, what: str, expected: str, found_text: str, remedy: str = "") -> None:
        found.append(Finding(grade=Grade.REFUSE, file=plan.file, line=line, what=what, expected=expected,
                             found=found_text, remedy=remedy))

    _check_references(plan, frozenset(root.at(("parameters",)).entries or ()), fault)
    _check_reaction(plan, root, fault)
    _check_rests(plan, fault)
    _check_names(plan, fault)
    _check_acceptance(plan, fault)
    return (*found, *_at_every_value(plan))


def _values_in(thing: Any) -> list[Value]:
    """Every value anywhere in a plan."""
    if isinstance(thing, Value):
        return [thing]
    if isinstance(thing, tuple):
        return [value for item in thing for value in _values_in(item)]
    if is_dataclass(thing) and not isinstance(thing, type):
        return [value for f in fields(thing) for value in _values_in(getattr(thing, f.name))]
    return []


def _check_references(plan: Plan, declared: frozenset[str], fault: Fault) -> None:
    known = {parameter.name: parameter for parameter in plan.parameters}
    used = set()
    for value in _values_in(replace(plan, parameters=())):
        if not value.parameter:
            continue
        used.add(value.parameter)
        parameter = known.get(value.parameter)
        if parameter is None and value.parameter not in declared:
            near = nearest_word(value.parameter, known)
            names = f"a declared parameter ({', '.join(known)})" if known else f"a {value.dimension.value}"
            fault(value.line, "parameter", f"{names}", f"'{value.parameter}'",
                  f"did you mean '{near}'?" if near else "declare it under 'parameters' with its bounds")
        elif parameter is not None and parameter.dimension is not value.needs:
            fault(value.line, "parameter", f"a {value.needs.value}",
                  f"'{parameter.name}', a {parameter.dimension.value}")
    if not any(isinstance(step, PlanGap) for step in _flat(plan.steps)):
        for parameter in plan.parameters:
            if parameter.name not in used:
                fault(parameter.line, f"parameters.{parameter.name}", "a parameter that the plan uses",
                      "one that nothing refers to")


def _flat(steps: tuple[PlanStep, ...]) -> list[PlanStep]:
    """Every step, those inside repeats too."""
    flat: list[PlanStep] = []
    for step in steps:
        flat.append(step)
        if isinstance(step, PlanRepeat):
            flat += _flat(step.steps)
    return flat


def _check_reaction(plan: Plan, root: Node, fault: Fault) -> None:
    pause, retreat = plan.pause, plan.retreat
    restoring = plan.specimen_kind is SpecimenKind.SELF_RESTORING
    if retreat is not None and not restoring:
        fault(retreat.line, "retreat", f"'specimen: {SpecimenKind.SELF_RESTORING}'", f"'{plan.specimen_kind}'",
              "insulation that does not recover is one run and one arm for each specimen")
    if pause is not None and not restoring:
        fault(pause.line, "arc", f"'reaction: latch', or 'specimen: {SpecimenKind.SELF_RESTORING}'",
              "'reaction: pause'")
    if retreat is not None and pause is None:
        if not root.has(("arc",)):
            fault(retreat.line, "retreat", "'arc' with 'reaction: pause'", "no 'arc', so that an arc latches")
        elif root.at(("arc", "reaction")).text == "latch":
            fault(retreat.line, "retreat", "'arc' with 'reaction: pause'", "'reaction: latch'")
    if pause is not None and not root.has(("retreat",)):
        fault(pause.line, "arc", "'retreat', which says how the plan goes on after a pause", "nothing")


def _check_rests(plan: Plan, fault: Fault) -> None:
    """The first segment after a pause leaves after the arc reaction's rest and before the pause expires."""
    pause, retreat = plan.pause, plan.retreat
    if pause is None or retreat is None or retreat.rest is None:
        return
    if pause.rest.parameter or retreat.rest.parameter:
        return  # the compiler judges the values that fill them
    low, high = pause.rest.factor, pause.rest.factor + RETREAT_LATEST_S
    if not low <= retreat.rest.factor <= high:
        fault(retreat.rest.line, "retreat.rest", f"from {_seconds(low)} (the arc reaction's rest) to {_seconds(high)}, "
              "before the pause expires", _seconds(retreat.rest.factor))


def _check_names(plan: Plan, fault: Fault) -> None:
    seen: dict[str, int] = {}
    for step in _flat(plan.steps):
        if step.name in seen and step.name:
            fault(step.line, "name", "a name of its own for each step", f"'{step.name}' again (first on line "
                  f"{seen[step.name]})")
        seen.setdefault(step.name, step.line)


def _check_acceptance(plan: Plan, fault: Fault) -> None:
    flat = _flat(plan.steps)
    if any(isinstance(step, PlanGap) for step in flat):
        return
    holds = [step for step in flat if isinstance(step, PlanHold | PlanStaircase)]
    names = {step.name or ("hold" if isinstance(step, PlanHold) else "staircase") for step in holds}
    until = next((step for step in flat if isinstance(step, PlanRamp) and step.until_breakdown), None)
    for criterion in plan.acceptance:
        if criterion.hold and criterion.hold not in names:
            near = nearest_word(criterion.hold, names)
            fault(criterion.line, "acceptance.hold", "the name of a hold or staircase"
                  + (f" ({', '.join(sorted(names))})" if names else ""), f"'{criterion.hold}'",
                  f"did you mean '{near}'?" if near else "")
        elif not holds and criterion.kind in ON_HOLDS:
            fault(criterion.line, "acceptance", "a hold that it can be judged on", f"'{criterion.kind}' without one")
        if criterion.kind is CriterionKind.NO_BREAKDOWN and until is not None:
            fault(criterion.line, "acceptance", "no such criterion in a plan that ramps until breakdown "
                  f"(line {until.line})", f"'{criterion.kind}'")


def _at_every_value(plan: Plan) -> list[Finding]:
    """Findings of the walk that stand at both ends of the parameters' bounds."""
    ends = []
    for end in ("low", "high"):
        values = {parameter.name: getattr(parameter, end) for parameter in plan.parameters}
        walked = Unrolled(plan, values, Defaults(limit_a=1.0, slew_v_per_s=float("inf")))
        walked.walk(plan.steps)
        if not walked.holed:
            criteria_of(walked)
        ends.append({(f.line, f.what): f for f in reversed(walked.findings)})
    low, high = ends
    return [finding for key, finding in low.items() if key in high]


def _seconds(value: float) -> str:
    return format_quantity(value, Dimension.SECOND)
