"""From the blocks of a plan file to its steps, each read by itself so that one fault hides no other."""

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from typing import Any

from hvhost.plan.blocks import StepBlock
from hvhost.plan.plan import (
    HoldTerms,
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
from hvhost.plan.program import HoldClock, WhenOut
from hvhost.words.findings import Finding, Grade
from hvhost.words.modelpaths import Absent, partial_of
from hvhost.words.textfile import Node

KINDS = ("ramp", "hold", "staircase", "rest", "repeat")
Place = tuple[str | int, ...]


def named(place: Place) -> str:
    """A place as findings show it: list places count from 1."""
    return ".".join(str(part + 1) if isinstance(part, int) else part for part in place)


@dataclass(slots=True)
class Builder:
    """What all builders share: the file, its tree, and the findings so far."""

    file: str
    root: Node
    findings: list[Finding] = field(default_factory=list)

    def fault(self, place: Place, expected: str, found: str = "", remedy: str = "") -> None:
        """Note a fault that refuses, at the line of a place."""
        self.findings.append(Finding(grade=Grade.REFUSE, file=self.file, line=self.root.line_of(*place),
                                     what=named(place), expected=expected, found=found, remedy=remedy))

    def placed(self, value: Value | None, place: Place) -> Value | None:
        """Give a value its line."""
        return None if value is None else replace(value, line=self.root.line_of(*place))

    def must(self, value: Value, place: Place) -> Value:
        """Give a value that is there its line."""
        return replace(value, line=self.root.line_of(*place))

    @contextmanager
    def known(self) -> Iterator[None]:
        """Skip a check that needs a value which was a fault itself."""
        try:
            yield
        except Absent:
            return


def limits_of(build: Builder, block: Any, place: Place) -> PlanLimits:
    """Return the limits of a block, or none at all where it is None."""
    if block is None:
        return PlanLimits()
    with build.known():
        if (block.level is None) != (block.level_time is None):
            build.fault(place, "both 'level' and 'level_time', or neither", "one of them")
    names = ("trip", "level", "level_time", "overvoltage", "arc_energy")
    return PlanLimits(**{name: build.placed(getattr(block, name), (*place, name)) for name in names})


def build_steps(build: Builder, place: Place) -> tuple[PlanStep, ...]:
    """Return the steps of the list at ``place``; a faulty one becomes a gap."""
    items = build.root.at(place).items
    if items is None or not build.root.has(place):
        return (PlanGap(line=build.root.line_of(*place)),)
    if not items:
        build.fault(place, "at least one step", "an empty list")
    return tuple(_step(build, (*place, at), node) for at, node in enumerate(items))


def _step(build: Builder, place: Place, node: Node) -> PlanStep:
    given = [kind for kind in KINDS if kind in (node.entries or {})]
    if len(given) != 1:
        if node.entries is not None and (given or not node.entries):
            build.fault(place, f"one of {', '.join(KINDS)}", " and ".join(given) or "nothing",
                        "give each step a '-' of its own" if given else "")
        return PlanGap(line=node.line)
    kind = given[0]
    block = partial_of(StepBlock, node.plain())
    try:
        return _BUILD[kind](build, getattr(block, kind), (*place, kind))
    except Absent:
        return PlanGap(line=build.root.line_of(*place, kind))


def _ramp(build: Builder, block: Any, place: Place) -> PlanStep:
    with build.known():
        given = [key for key in ("rate", "duration") if getattr(block, key) is not None]
        if len(given) != 1:
            build.fault(place, "'rate' or 'duration', one of them", " and ".join(given) or "neither")
    return PlanRamp(line=build.root.line_of(*place), name=block.name or "", to=build.must(block.to, (*place, "to")),
                    rate=build.placed(block.rate, (*place, "rate")),
                    duration=build.placed(block.duration, (*place, "duration")),
                    until_breakdown=block.until is not None,
                    current_limit=build.placed(block.current_limit, (*place, "current_limit")),
                    limits=limits_of(build, block.limits, (*place, "limits")))


def _terms(build: Builder, block: Any, place: Place) -> HoldTerms:
    with build.known():
        if block.clock is HoldClock.ACCUMULATE and block.when_out is not None:
            build.fault((*place, "when_out"), "no 'when_out' with 'clock: accumulate', which only pauses its clock",
                        f"'{block.when_out}'")
    with build.known():
        if block.origin is not None and not block.readings:
            build.fault((*place, "origin"), "'readings' that count from it", "none")
    readings = tuple(build.must(value, (*place, "readings", at)) for at, value in enumerate(block.readings))
    return HoldTerms(hold=build.must(block.hold_for, (*place, "for")),
                     at_most=build.must(block.at_most, (*place, "at_most")), clock=block.clock,
                     when_out=block.when_out or WhenOut.FAIL,
                     tolerance=build.placed(block.tolerance, (*place, "tolerance")),
                     window=build.placed(block.window, (*place, "window")), readings=readings,
                     origin=block.origin or "", origin_line=build.root.line_of(*place, "origin"),
                     guard_band=block.guard_band)


def _hold(build: Builder, block: Any, place: Place) -> PlanStep:
    return PlanHold(line=build.root.line_of(*place), name=block.name or "", terms=_terms(build, block, place),
                    current_limit=build.placed(block.current_limit, (*place, "current_limit")),
                    limits=limits_of(build, block.limits, (*place, "limits")))


def _staircase(build: Builder, block: Any, place: Place) -> PlanStep:
    return PlanStaircase(line=build.root.line_of(*place), name=block.name or "",
                         start=build.must(block.start, (*place, "from")), to=build.must(block.to, (*place, "to")),
                         step=build.must(block.step, (*place, "step")),
                         rate=build.placed(block.rate, (*place, "rate")), terms=_terms(build, block, place),
                         current_limit=build.placed(block.current_limit, (*place, "current_limit")),
                         limits=limits_of(build, block.limits, (*place, "limits")))


def _rest(build: Builder, value: Any, place: Place) -> PlanStep:
    return PlanRest(line=build.root.line_of(*place), name="", rest=build.must(value, place))


def _repeat(build: Builder, block: Any, place: Place) -> PlanStep:
    inner = build_steps(build, (*place, "steps"))
    return PlanRepeat(line=build.root.line_of(*place), name="", times=build.must(block.times, (*place, "times")),
                      steps=inner)


_BUILD = {"ramp": _ramp, "hold": _hold, "staircase": _staircase, "rest": _rest, "repeat": _repeat}
