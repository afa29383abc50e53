"""Rules that compare a readback with one limit: overcurrent, its level in time, overvoltage, saturated, reversed.

Each is ``rule(view, limits, memory) -> (memory, verdict or None)``: no clock, no log, no state of its own.  An
amplitude counts when ``persist`` consecutive samples exceed it; a shorter excursion is added to the memory's ``odd``.
A gap does not break an excursion.  One rule gives at most one verdict a block and one an excursion.
"""

from collections.abc import Sequence
from typing import NamedTuple

from hvhost.guard.limits import GuardLimits
from hvhost.guard.verdicts import Severity, Verdict
from hvhost.guard.view import View
from hvhost.wire.vocabulary import HostRule, McuState


class Run(NamedTuple):
    """Consecutive samples beyond a limit; ``reported`` once it led to a verdict; ``odd`` counts the shorter ones."""

    length: int = 0
    reported: bool = False
    odd: int = 0
    waiting: int = -1  # index of an overcurrent that may yet prove to be an arc's


class Level(NamedTuple):
    """Samples since a level was first exceeded, and the consecutive ones at or below it that end with the last."""

    length: int = 0
    below: int = 0
    reported: bool = False


class Pinned(NamedTuple):
    """Consecutive samples of both channels under one condition."""

    v: int = 0
    i: int = 0
    v_reported: bool = False
    i_reported: bool = False


Judgement = tuple[Run, Verdict | None]


def verdict(rule: HostRule, severity: Severity, view: View, at: int, limit: int, measured: int, text: str) -> Verdict:
    """Build the verdict for the sample at this position of the block."""
    return Verdict(rule=rule, severity=severity, limit=limit, measured=measured, index=view.index + at,
                   tick=view.tick(at), text=text)


def exceed(codes: Sequence[int], limit: int, need: int, run: Run) -> tuple[Run, int]:
    """Follow the samples above ``limit``; return the run and where one first reached ``need``, or -1."""
    length, reported, odd, waiting = run
    at = -1
    for k, code in enumerate(codes):
        if code > limit:
            length += 1
            if length >= need and not reported:
                reported = True
                at = k if at < 0 else at
        elif length:
            odd += length < need
            length, reported = 0, False
    return Run(length, reported, odd, waiting), at


def overcurrent(view: View, limits: GuardLimits, run: Run) -> Judgement:
    """Absolute overcurrent: the current readback above its limit for n samples.

    Where arcs may pause the run, an overcurrent that a collapse accompanies within w samples belongs to the arc (an
    event, the breakdown's verdict acts); where no collapse is seen yet it waits for at most w samples.
    """
    if view.i_high <= limits.overcurrent and not run.length and run.waiting < 0:
        return run, None
    after, at = exceed(view.i, limits.overcurrent, limits.persist, run)
    if run.waiting >= 0:
        return _settle_waiting(view, limits, after)
    if at < 0:
        return after, None
    text = f"current {limits.milliamps(view.i[at])} above {limits.milliamps(limits.overcurrent)}"
    severity = Severity.TRIP
    if limits.arc_wait:
        if _near_collapse(view, view.index + at, limits):
            severity, text = Severity.EVENT, f"{text}, with a collapse"
        elif view.energised and view.last_index - view.index - at < limits.drop_samples:
            return after._replace(waiting=view.index + at), None
    return after, verdict(HostRule.OVERCURRENT, severity, view, at, limits.overcurrent, view.i[at], text)


def _settle_waiting(view: View, limits: GuardLimits, run: Run) -> Judgement:
    """Decide on an overcurrent near the end of the block before, now that more samples are known."""
    index = run.waiting
    arc = view.state == McuState.PAUSING or _near_collapse(view, index, limits)
    if not arc and view.energised and view.last_index - index < limits.drop_samples:
        return run, None
    severity = Severity.EVENT if arc else Severity.TRIP
    text = f"current above {limits.milliamps(limits.overcurrent)}" + (", with a collapse" if arc else "")
    return run._replace(waiting=-1), Verdict(
        rule=HostRule.OVERCURRENT, severity=severity, limit=limits.overcurrent, measured=limits.overcurrent + 1,
        index=index, tick=view.tick(index - view.index), text=text)


def _near_collapse(view: View, index: int, limits: GuardLimits) -> bool:
    fall = view.collapse
    return fall is not None and fall.started - limits.drop_samples <= index <= fall.last + limits.drop_samples


def overcurrent_level(view: View, limits: GuardLimits, level: Level) -> tuple[Level, Verdict | None]:
    """Overcurrent level and time: above the level for ``level_samples``; fewer than n samples below do not end it."""
    if not limits.level or (view.i_high <= limits.level and not level.length):
        return level, None
    length, below, reported = level
    length += view.gap if length else 0
    need = max(limits.level_samples, limits.persist)  # however short the time is, one sample is never enough
    found: Verdict | None = None
    for k, code in enumerate(view.i):
        if code > limits.level:
            length, below = length + 1, 0
            if length >= need and not reported:
                reported = True
                found = found or verdict(
                    HostRule.OVERCURRENT_LEVEL, Severity.TRIP, view, k, limits.level, code,
                    f"current above {limits.milliamps(limits.level)} for {limits.seconds(length)}")
        elif length:
            length, below = length + 1, below + 1
            if below >= limits.persist:
                length, below, reported = 0, 0, False
    return Level(length, below, reported), found


def overvoltage(view: View, limits: GuardLimits, run: Run) -> Judgement:
    """Absolute overvoltage: the voltage readback above its limit for n samples."""
    if view.v_high <= limits.overvoltage and not run.length:
        return run, None
    after, at = exceed(view.v, limits.overvoltage, limits.persist, run)
    if at < 0:
        return after, None
    return after, verdict(HostRule.OVERVOLTAGE, Severity.TRIP, view, at, limits.overvoltage, view.v[at],
                          f"voltage {limits.volts(view.v[at])} above {limits.volts(limits.overvoltage)}")


def saturated(view: View, limits: GuardLimits, pinned: Pinned) -> tuple[Pinned, Verdict | None]:
    """A code stands at the converter's limit for ``saturated_samples``: the readback says nothing any more."""
    v_low, v_high = limits.v_limits
    i_low, i_high = limits.i_limits
    if (view.v_high < v_high and view.i_high < i_high and view.v_low > v_low and view.i_low > i_low
            and not (pinned.v or pinned.i)):
        return pinned, None
    need = limits.saturated_samples
    v, v_reported, v_at = pin([not v_low < code < v_high for code in view.v], need, pinned.v, pinned.v_reported)
    i, i_reported, i_at = pin([not i_low < code < i_high for code in view.i], need, pinned.i, pinned.i_reported)
    after = Pinned(v, i, v_reported, i_reported)
    if v_at < 0 and i_at < 0:
        return after, None
    at, what, codes = (v_at, "voltage", view.v) if _first(v_at, i_at) else (i_at, "current", view.i)
    return after, verdict(HostRule.SATURATED, Severity.TRIP, view, at, need, codes[at],
                          f"{what} readback at the converter's limit for {limits.seconds(need)}")


def pin(marks: Sequence[bool], need: int, length: int, reported: bool) -> tuple[int, bool, int]:
    """Follow consecutive true marks; return length, whether reported, and where one first reached ``need``, or -1."""
    at = -1
    for k, mark in enumerate(marks):
        if not mark:
            length, reported = 0, False
            continue
        length += 1
        if length >= need and not reported:
            reported, at = True, k if at < 0 else at
    return length, reported, at


def _first(at: int, other: int) -> bool:
    """True where position ``at`` is one and does not come after ``other``."""
    return at >= 0 and (other < 0 or at <= other)


def reversed_readback(view: View, limits: GuardLimits, pinned: Pinned) -> tuple[Pinned, Verdict | None]:
    """A readback of the wrong sign beyond the zero band.

    Voltage: n samples.  Current: ``missing_samples``, and only where the readback is not above the set-point: a load
    that discharges into the bench drives its current backwards.
    """
    v_floor, i_floor = -limits.zero_band, -limits.i_band
    if view.v_low >= v_floor and view.i_low >= i_floor and not (pinned.v or pinned.i):
        return pinned, None
    ceiling = (view.v_word * limits.v_map_q16 >> 16) + limits.zero_band
    v, v_reported, v_at = pin([code < v_floor for code in view.v], limits.persist, pinned.v, pinned.v_reported)
    i, i_reported, i_at = pin([code < i_floor and at <= ceiling for code, at in zip(view.i, view.v, strict=True)],
                              limits.missing_samples, pinned.i, pinned.i_reported)
    after = Pinned(v, i, v_reported, i_reported)
    if _first(v_at, i_at):
        return after, verdict(HostRule.REVERSED, Severity.TRIP, view, v_at, v_floor, view.v[v_at],
                              f"voltage readback {limits.volts(view.v[v_at])} has the wrong sign")
    if i_at >= 0:
        return after, verdict(HostRule.REVERSED, Severity.TRIP, view, i_at, i_floor, view.i[i_at],
                              f"current readback {limits.milliamps(view.i[i_at])} has the wrong sign")
    return after, None
