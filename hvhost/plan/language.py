"""The plan's file: read, checked by itself, and turned into a `Plan`.

Every fault is found in one go: fields that were right are checked against each other although others are at fault, and
a faulty step leaves a gap around which the rest is checked.  What depends on a parameter's value is a fault of the
plan only if it holds at both ends of every parameter's bounds; otherwise the run sheet's values decide.
"""

from contextlib import suppress
from dataclasses import replace
from pathlib import Path
from typing import Any

from hvhost.plan.blocks import CriterionBlock, ParameterBlock, PlanBlock, parse_value
from hvhost.plan.criteria import CRITERION_LIMITS, criterion_faults
from hvhost.plan.passing import text_hash
from hvhost.plan.plan import (
    Parameter,
    Plan,
    PlanCriterion,
    PlanLimits,
    PlanPause,
    PlanRetreat,
    Release,
)
from hvhost.plan.program import CriterionKind, SpecimenKind
from hvhost.plan.steps import Builder, Place, build_steps, limits_of
from hvhost.plan.together import faults_together
from hvhost.words.errors import FileFault, QuantityFault
from hvhost.words.findings import Finding, refused
from hvhost.words.modelpaths import Absent, partial_of
from hvhost.words.quantities import Dimension, parse_quantity
from hvhost.words.sniff import other_kind
from hvhost.words.textfile import read_model, read_text

# What a parameter may measure: the dimensions that a plan's values have.
PARAMETERS = (Dimension.VOLT, Dimension.AMP, Dimension.SECOND, Dimension.VOLT_PER_SECOND, Dimension.JOULE,
              Dimension.OHM, Dimension.PERCENT, Dimension.INTEGER)


def load_plan(path: Path) -> Plan:
    """Return the plan of a file; raises FileFault with every finding where anything refuses."""
    plan, findings = read_plan(path.name, read_text(path))
    if plan is None:
        raise FileFault("a plan without faults", f"{len(refused(findings))} faults", str(path),
                        f"'hvhost check {path}' lists them", findings=findings)
    return plan


def check_plan(path: Path) -> tuple[Finding, ...]:
    """Return every finding of one plan file, in the order of its lines; never raises for what the file holds."""
    try:
        return read_plan(path.name, read_text(path))[1]
    except FileFault as unreadable:
        return tuple(f for f in unreadable.findings if isinstance(f, Finding))


def plan_schema() -> dict[str, Any]:
    """Return the JSON Schema of a plan file."""
    return PlanBlock.model_json_schema(by_alias=True)


def read_plan(file: str, text: str) -> tuple[Plan | None, tuple[Finding, ...]]:
    """Return the plan (None where anything refuses) and every finding, in the order of their lines."""
    if other := other_kind(file, text, "plan"):
        return None, other
    reading = read_model(PlanBlock, file, text)
    build = Builder(file, reading.root)
    plan = _plan(build, reading.partial, text) if reading.root.entries else None
    found = [*reading.findings, *build.findings, *(faults_together(plan, build.root) if plan else ())]
    findings = tuple(sorted(dict.fromkeys(found), key=lambda f: f.line))
    if plan is None or reading.model is None or refused(findings):
        return None, findings
    return replace(plan, findings=findings), findings


# ---------------------------------------------------------------- building


def _plan(build: Builder, block: Any, text: str) -> Plan:
    """Return the plan as far as it could be read; what could not has left a finding."""
    limits = PlanLimits()
    with build.known():
        limits = limits_of(build, block.limits, ("limits",))
    steps = build_steps(build, ("steps",))
    return Plan(file=build.file, text=text, sha256=text_hash(text), title=_or(block, "plan", ""),
                specimen_kind=_or(block, "specimen", SpecimenKind.SELF_RESTORING), release=_release(build, block),
                parameters=_parameters(build),
                current_limit=build.placed(_or(block, "current_limit", None), ("current_limit",)), limits=limits,
                pause=_pause(build, _or(block, "arc", None)), retreat=_retreat(build, _or(block, "retreat", None)),
                steps=steps, acceptance=_acceptance(build))


def _or(block: Any, name: str, default: Any) -> Any:
    try:
        return getattr(block, name)
    except Absent:
        return default


def _release(build: Builder, block: Any) -> Release | None:
    with suppress(Absent):
        if block.released is not None:
            return Release(by=block.released.by, on=block.released.on, line=build.root.line_of("released"))
    return None


def _parameters(build: Builder) -> tuple[Parameter, ...]:
    entries = build.root.at(("parameters",)).entries if build.root.has(("parameters",)) else None
    made = []
    for name, node in (entries or {}).items():
        with build.known():
            made.append(_parameter(build, name, partial_of(ParameterBlock, node.plain())))
    return tuple(parameter for parameter in made if parameter is not None)


def _parameter(build: Builder, name: str, block: Any) -> Parameter | None:
    place: Place = ("parameters", name)
    if block.quantity not in PARAMETERS:
        build.fault((*place, "quantity"), f"one of {', '.join(PARAMETERS)}", f"'{block.quantity}'")
        return None
    numbers: dict[str, float | None] = {}
    for key, text in (("from", block.low), ("to", block.high), ("default", block.default)):
        try:
            numbers[key] = None if text is None else parse_quantity(text, block.quantity)
        except QuantityFault as fault:
            build.fault((*place, key), fault.expected, fault.found, fault.remedy)
    if len(numbers) < 3:
        return None
    low, high, default = numbers["from"] or 0.0, numbers["to"] or 0.0, numbers["default"]
    if high < low:
        build.fault((*place, "to"), f"at least 'from' ({block.low})", f"'{block.high}'")
        return None
    if default is not None and not low <= default <= high:
        build.fault((*place, "default"), f"a value from {block.low} to {block.high}", f"'{block.default}'")
    return Parameter(name=name, dimension=block.quantity, low=low, high=high, default=default,
                     line=build.root.line_of(*place))


def _pause(build: Builder, block: Any) -> PlanPause | None:
    if block is None:
        return None
    keys = ("count", "rest", "window")
    given = [key for key in keys if build.root.has(("arc", key))]
    reaction = _or(block, "reaction", "")
    if reaction == "latch":
        for key in given:
            build.fault(("arc", key), "no such key with 'reaction: latch'", f"'{key}'")
        return None
    if reaction == "pause":
        for key in keys:
            if key not in given:
                build.fault(("arc",), f"the key '{key}' with 'reaction: pause'", "nothing")
    if reaction != "pause" or len(given) < len(keys):
        return None
    try:
        count, rest, window = (build.must(getattr(block, key), ("arc", key)) for key in keys)
    except Absent:
        return None
    return PlanPause(count=count, rest=rest, window=window, line=build.root.line_of("arc"))


def _retreat(build: Builder, block: Any) -> PlanRetreat | None:
    if block is None:
        return None
    place: Place = ("retreat",)
    try:
        back = build.must(block.back, (*place, "back"))
        return PlanRetreat(rest=build.placed(block.rest, (*place, "rest")), back=back,
                           back_is_fraction=back.dimension is Dimension.PERCENT,
                           climb=build.placed(block.climb, (*place, "climb")),
                           series=build.must(block.series, (*place, "series")), line=build.root.line_of(*place))
    except Absent:
        return None


def _acceptance(build: Builder) -> tuple[PlanCriterion, ...]:
    nodes = build.root.at(("acceptance",)).items if build.root.has(("acceptance",)) else None
    made = []
    for at, node in enumerate(nodes or ()):
        with build.known():
            made.append(_criterion(build, partial_of(CriterionBlock, node.plain()), ("acceptance", at)))
    return tuple(made)


def _criterion(build: Builder, block: Any, place: Place) -> PlanCriterion:
    kind: CriterionKind = block.criterion
    dimension = CRITERION_LIMITS[kind]
    limit = None
    if block.limit is not None and dimension is not None:
        try:
            limit = build.must(parse_value(block.limit, dimension, above=0.0), (*place, "limit"))
        except QuantityFault as fault:
            build.fault((*place, "limit"), fault.expected, fault.found, fault.remedy)
    for key, expected, found in criterion_faults(kind, block.limit is not None, block):
        build.fault((*place, key) if build.root.has((*place, key)) else place, expected, found)
    return PlanCriterion(kind=kind, limit=limit, hold=block.hold or "", at=build.placed(block.at, (*place, "at")),
                         tolerance=build.placed(block.tolerance, (*place, "tolerance")), guard_band=block.guard_band,
                         line=build.root.line_of(*place))
