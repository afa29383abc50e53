"""Rules that compare the readback with the set-point: deviation, not following, stuck, missing.

The set-point is known at each block's first sample; a rule that needs words at rest takes them as at rest where two
blocks in a row begin with the same words.
"""

from typing import NamedTuple

from hvhost.guard.amplitude import verdict
from hvhost.guard.limits import GuardLimits
from hvhost.guard.verdicts import Severity, Verdict
from hvhost.guard.view import View
from hvhost.wire.vocabulary import HostRule

AT_LIMIT_Q16 = 62259  # 0.95: from this share of the current set-point on the supply counts as in current control


class Apart(NamedTuple):
    """How long the readback has been below, above and rising above the set-point, and the least it was since above."""

    below: int = 0
    above: int = 0
    rising: int = 0
    least: int = 0
    told_below: bool = False
    told_above: bool = False
    told_rising: bool = False


class Climb(NamedTuple):
    """A ramp's start under watch: where words and readback began, and where the words had risen far enough."""

    stage: int = 0  # 0 not rising, 1 rising, 2 far enough, 3 checked
    start_word: int = 0
    start_v: int = 0
    check_index: int = 0
    check_word: int = 0


class Still(NamedTuple):
    """Consecutive samples with one and the same code."""

    code: int = 0
    length: int = 0
    reported: bool = False


class Missing(NamedTuple):
    """Consecutive samples at zero although the set-point is not."""

    length: int = 0
    reported: bool = False


def deviation(view: View, limits: GuardLimits, apart: Apart) -> tuple[Apart, Verdict | None]:
    """Readback away from the set-point for ``deviation_samples``, the words at rest.

    Below it: an event, 'held down' (the front panel's lower set-point wins) or 'in current limit'.  Above it: an event
    where it only fails to fall (a one-quadrant supply cannot pull a charged load down), a trip where it rises.
    """
    limit = limits.deviation
    if not limit:
        return apart, None
    before = view.before[-1] if view.before else None
    if before is None or before.v_word != view.v_word or before.block.i_word != view.block.i_word:
        return AT_REST, None
    expected = view.v_word * limits.v_map_q16 >> 16
    if expected - limit <= view.v_low and view.v_high <= expected + limit:
        return AT_REST, None
    found: Verdict | None = None
    for k, code in enumerate(view.v):
        apart = _apart(apart, code, expected, limit)
        if found is None and max(apart.below, apart.above) >= limits.deviation_samples:
            apart, found = _tell(view, k, limits, apart, expected)
    return apart, found


AT_REST = Apart()


def _apart(apart: Apart, code: int, expected: int, limit: int) -> Apart:
    """Count one sample."""
    if code < expected - limit:
        return Apart(below=apart.below + 1, told_below=apart.told_below)
    if code <= expected + limit:
        return AT_REST
    least = min(apart.least, code) if apart.above else code
    rising = apart.rising + 1 if code > least + limit else 0
    return Apart(above=apart.above + 1, rising=rising, least=least, told_above=apart.told_above,
                 told_rising=apart.told_rising and rising > 0)


def _tell(view: View, at: int, limits: GuardLimits, apart: Apart, expected: int) -> tuple[Apart, Verdict | None]:
    """Say once what lasts: held down, in current limit, slow to fall, rising."""
    need = limits.deviation_samples
    if apart.below >= need and not apart.told_below:
        at_limit = view.i[at] << 16 >= (view.block.i_word * limits.i_map_q16 >> 16) * AT_LIMIT_Q16
        why = "in current limit" if at_limit else "held down"
        told, severity = apart._replace(told_below=True), Severity.EVENT
        text = f"{why}: {limits.volts(view.v[at])} with {limits.volts(expected)} set"
    elif apart.rising >= need and not apart.told_rising:
        told, severity = apart._replace(told_rising=True, told_above=True), Severity.TRIP
        text = f"voltage {limits.volts(view.v[at])} rises above the set-point of {limits.volts(expected)}"
    elif apart.above >= need and not apart.told_above:
        told, severity = apart._replace(told_above=True), Severity.EVENT
        text = f"slow to fall: {limits.volts(view.v[at])} with {limits.volts(expected)} set"
    else:
        return apart, None
    return told, verdict(HostRule.DEVIATION, severity, view, at, limits.deviation, view.v[at] - expected, text)


def not_following(view: View, limits: GuardLimits, climb: Climb) -> tuple[Climb, Verdict | None]:
    """At the start of a ramp the readback shows at least a share of the set-point's rise, after the delay."""
    if not limits.follow_word or not view.before:
        return STANDING, None
    last, word = view.before[-1].v_word, view.v_word
    if word <= last:
        return STANDING, None
    if climb.stage == 0:
        climb = Climb(stage=1, start_word=last, start_v=view.before[-1].v_low)
    if climb.stage == 1 and word - climb.start_word >= limits.follow_word:
        climb = climb._replace(stage=2, check_index=view.index, check_word=word)
    if climb.stage != 2 or view.last_index < climb.check_index + limits.delay_samples:
        return climb, None
    climb = climb._replace(stage=3)
    expected = climb.check_word * limits.v_map_q16 >> 16
    # required = start + share x (expected - start); a load still charged above the words has nothing to follow
    required = climb.start_v + (limits.follow_q16 * (expected - climb.start_v) >> 16)
    if expected <= climb.start_v + limits.zero_band or view.v_high >= required:
        return climb, None
    return climb, verdict(HostRule.NOT_FOLLOWING, Severity.TRIP, view, len(view.v) - 1, required, view.v_high,
                          f"readback {limits.volts(view.v_high)} does not follow the set-point of "
                          f"{limits.volts(expected)}")


STANDING = Climb()


def stuck(view: View, limits: GuardLimits, still: Still) -> tuple[Still, Verdict | None]:
    """The voltage readback shows one and the same code for ``stuck_samples`` while the set-point is not near zero."""
    need = limits.stuck_samples
    if not need or view.v_word < limits.missing_word:
        return STIRRED, None
    code, length, reported = still
    if view.v_low != view.v_high and length + len(view.v) < need:
        # no run can reach its length in this block: only the equal codes at its end matter
        v, length = view.v, 1
        while v[-length - 1] == v[-1]:
            length += 1
        return Still(v[-1], length), None
    at = -1
    for k, now in enumerate(view.v):
        if now == code and length:
            length += 1
        else:
            code, length, reported = now, 1, False
        if length >= need and not reported:
            reported, at = True, k if at < 0 else at
    after = Still(code, length, reported)
    if at < 0:
        return after, None
    return after, verdict(HostRule.STUCK, Severity.TRIP, view, at, need, view.v[at],
                          f"voltage readback unchanged for {limits.seconds(need)}")


STIRRED = Still()


def missing(view: View, limits: GuardLimits, run: Missing) -> tuple[Missing, Verdict | None]:
    """The voltage readback stands at zero for ``missing_samples`` although the set-point is not near zero."""
    if view.v_low > limits.zero_band and not run.length:
        return run, None
    if view.v_word < limits.missing_word:
        return PRESENT, None
    length, reported = run
    found: Verdict | None = None
    for k, code in enumerate(view.v):
        if code > limits.zero_band:
            length, reported = 0, False
            continue
        length += 1
        if length >= limits.missing_samples and not reported:
            reported = True
            found = found or verdict(
                HostRule.MISSING, Severity.TRIP, view, k, limits.missing_samples, code,
                f"no voltage readback for {limits.seconds(length)} with "
                f"{limits.volts(view.v_word * limits.v_map_q16 >> 16)} set")
    return Missing(length, reported), found


PRESENT = Missing()
