"""Pass, fail or not decided, criterion by criterion, each with the rule by which it was judged (JCGM 106).

Two rules are used.  *Simple acceptance* compares the measured value itself with the limit; it needs an expanded
uncertainty that is small enough to be agreed beforehand, here at most 3 % of a direct test voltage (IEC 60060-1/-2).
*Guard bands* pass only what lies inside the limit by more than U, fail only what lies outside by more than U, and
leave the rest open; they are used for leakage and resistance, and for the level where the plan asks.  The criterion of
a withstand test is 'no disruptive discharge'.

A pass as a whole needs more than its criteria: that the run came to its end, that each hold was applied, that the
record has no hole in it, that the specimen was seen, and that no reason about calibration stands on the record.
"""

from collections.abc import Iterable
from dataclasses import dataclass
from enum import StrEnum

from hvhost.measure.breakdowns import Breakdown
from hvhost.measure.connected import Proof
from hvhost.measure.hold import HoldResult
from hvhost.measure.leakage import Reading
from hvhost.measure.uncertainty import Value
from hvhost.record.entries import Json, Outcome

U_LEVEL_MAX = 0.03  # IEC 60060-1/-2: expanded uncertainty of a mean direct voltage
MISSING_MAX = 0.01  # part of a hold's samples that may be absent
SIMPLE = f"simple acceptance on the measured mean (JCGM 106), U stated and at most {U_LEVEL_MAX * 100:g} %"
GUARD = "guard bands of U, k = 2 (JCGM 106): passes inside the limit by more than U, fails outside by more than U"
DISCHARGE = "withstand criterion: no disruptive discharge"


class Decision(StrEnum):
    """What is decided."""

    PASS = "pass"
    FAIL = "fail"
    OPEN = "not decided"


@dataclass(frozen=True, slots=True, kw_only=True)
class Judgement:
    """One criterion or condition, what was decided, by which rule, and why."""

    what: str
    decision: Decision
    rule: str
    text: str
    place: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Facts:
    """Everything that a verdict looks at."""

    outcome: str
    why: str
    program: Json
    holds: tuple[HoldResult, ...]
    readings: tuple[Reading, ...]
    breakdowns: tuple[Breakdown, ...]
    proof: Proof
    reasons: tuple[Json, ...]
    entries_lost: int


def below(value: Value, limit: float) -> Decision:
    """Judge 'at most ``limit``' with guard bands."""
    if value.high <= limit:
        return Decision.PASS
    return Decision.FAIL if value.low > limit else Decision.OPEN


def above(value: Value, limit: float) -> Decision:
    """Judge 'at least ``limit``' with guard bands."""
    if value.low >= limit:
        return Decision.PASS
    return Decision.FAIL if value.high < limit else Decision.OPEN


def level_simple(value: Value, limit: float) -> Decision:
    """Judge 'at least ``limit``' by simple acceptance; open where U is larger than agreed."""
    if value.relative > U_LEVEL_MAX:
        return Decision.OPEN
    return Decision.PASS if value.value >= limit else Decision.FAIL


def judge(facts: Facts) -> tuple[Decision, tuple[Judgement, ...]]:
    """Return the verdict and every judgement behind it: any fail fails, else anything open leaves it open."""
    criteria = tuple(j for c in facts.program.get("acceptance", ()) for j in _criterion(c, facts))
    if not criteria:
        nothing = Judgement(what="acceptance", decision=Decision.OPEN, rule="",
                            text="the plan states no acceptance criterion")
        return Decision.OPEN, (nothing,)
    judgements = (*criteria, *_conditions(facts))
    decisions = {j.decision for j in judgements}
    if any(j.decision is Decision.FAIL for j in criteria):
        return Decision.FAIL, judgements
    return (Decision.OPEN if decisions != {Decision.PASS} else Decision.PASS), judgements


# ---------------------------------------------------------------- criteria


def _criterion(criterion: Json, facts: Facts) -> Iterable[Judgement]:
    kind = str(criterion.get("kind"))
    judges = {"no breakdown": _no_breakdown, "level held": _level, "leakage below": _leakage,
              "resistance above": _resistance, "breakdown above": _breakdown_above}
    if kind not in judges:
        return (_open(criterion, kind, "", "this version does not know the criterion"),)
    return judges[kind](criterion, facts)


def _open(criterion: Json, what: str, rule: str, text: str) -> Judgement:
    return Judgement(what=what, decision=Decision.OPEN, rule=rule, text=text, place=str(criterion.get("place", "")))


def _no_breakdown(criterion: Json, facts: Facts) -> Iterable[Judgement]:
    place = str(criterion.get("place", ""))
    if facts.breakdowns:
        first = facts.breakdowns[0]
        text = (f"{len(facts.breakdowns)} disruptive discharge{'s' if len(facts.breakdowns) > 1 else ''}, the first at "
                f"{first.volts.value / 1e3:.3f} kV, {first.at_s:.3f} s into the record ({first.kind})")
        return (Judgement(what="no breakdown", decision=Decision.FAIL, rule=DISCHARGE, text=text, place=place),)
    return (Judgement(what="no breakdown", decision=Decision.PASS, rule=DISCHARGE, text="no disruptive discharge",
                      place=place),)


def _holds(criterion: Json, facts: Facts) -> list[HoldResult]:
    name = str(criterion.get("hold", ""))
    return [h for h in facts.holds if not name or h.name == name]


def _level(criterion: Json, facts: Facts) -> Iterable[Judgement]:
    limit = float(criterion.get("limit", 0.0))
    lowest = limit * (1.0 - float(criterion.get("tolerance", 0.0)))
    guarded = bool(criterion.get("guard_band"))
    rule = GUARD if guarded else SIMPLE
    holds = [h for h in _holds(criterion, facts) if h.mean is not None]
    if not holds:
        return (_open(criterion, "level held", rule, "the hold did not take place"),)
    out = []
    for hold in holds:
        assert hold.mean is not None
        decision = above(hold.mean, lowest) if guarded else level_simple(hold.mean, lowest)
        if decision is Decision.PASS and not hold.long_enough:
            decision = Decision.OPEN
        out.append(Judgement(what="level held", decision=decision, rule=rule, place=str(criterion.get("place", "")),
                             text=f"hold {hold.name!r}: mean {_kv(hold.mean)} for {hold.inside_s:.2f} s of "
                                  f"{hold.asked_s:g} s, at least {lowest / 1e3:.3f} kV asked"))
    return out


def _readings(criterion: Json, facts: Facts) -> list[Reading]:
    at_s, name = criterion.get("reading_s"), str(criterion.get("hold", ""))
    return [r for r in facts.readings if (not name or r.hold == name) and (at_s is None or abs(r.at_s - at_s) < 1e-6)]


def _leakage(criterion: Json, facts: Facts) -> Iterable[Judgement]:
    limit = float(criterion.get("limit", 0.0))
    found = _readings(criterion, facts)
    if not found:
        return (_open(criterion, "leakage below", GUARD, "there is no such reading"),)
    out = []
    for reading in found:
        if reading.amps is None:
            out.append(_open(criterion, "leakage below", GUARD, f"the reading at {reading.at_s:g} s was not reached"))
            continue
        whole = "" if reading.own_a is not None else ", the bench's own draw not taken off"
        out.append(Judgement(what="leakage below", decision=below(reading.amps, limit), rule=GUARD,
                             place=str(criterion.get("place", "")),
                             text=f"hold {reading.hold!r} at {reading.at_s:g} s: {_ua(reading.amps)}{whole}, at most "
                                  f"{limit * 1e6:.4g} µA asked"))
    return out


def _resistance(criterion: Json, facts: Facts) -> Iterable[Judgement]:
    limit = float(criterion.get("limit", 0.0))
    found = _readings(criterion, facts)
    if not found:
        return (_open(criterion, "resistance above", GUARD, "there is no such reading"),)
    return [_one_resistance(criterion, reading, limit) for reading in found]


def _one_resistance(criterion: Json, reading: Reading, limit: float) -> Judgement:
    asked = f"at least {limit / 1e6:.4g} MΩ asked"
    head = f"hold {reading.hold!r} at {reading.at_s:g} s"
    at_least, ohms = reading.ohms_at_least, reading.ohms
    if at_least is None or reading.amps is None or reading.volts is None:
        return _open(criterion, "resistance above", GUARD, f"{head}: not reached, or no current to divide by")
    # V / I lies between (V - U) / (I + U) and (V + U) / (I - U), open upward where I may be zero
    at_most = reading.volts.high / reading.amps.low if reading.amps.low > 0.0 else float("inf")
    decision = Decision.PASS if at_least >= limit else Decision.FAIL if at_most < limit else Decision.OPEN
    shown = f"at least {at_least / 1e6:.4g} MΩ"
    if ohms is not None:
        shown = f"{ohms.value / 1e6:.4g} MΩ, {shown}"
    return Judgement(what="resistance above", decision=decision, rule=GUARD, place=str(criterion.get("place", "")),
                     text=f"{head}: {shown}, {asked}")


def _breakdown_above(criterion: Json, facts: Facts) -> Iterable[Judgement]:
    limit = float(criterion.get("limit", 0.0))
    if not facts.breakdowns:
        return (_open(criterion, "breakdown above", SIMPLE, "no breakdown took place"),)
    return [Judgement(what="breakdown above", decision=level_simple(b.volts, limit), rule=SIMPLE,
                      place=str(criterion.get("place", "")),
                      text=f"breakdown {number} at {_kv(b.volts)}, at least {limit / 1e3:.3f} kV asked")
            for number, b in enumerate(facts.breakdowns, start=1)]


# ---------------------------------------------------------------- conditions of a pass


def _conditions(facts: Facts) -> Iterable[Judgement]:
    yield _ended(facts)
    yield from (_applied(h) for h in {h.number: h for h in facts.holds}.values())  # the last attempt of each
    planned = {s.get("number"): s.get("name") for s in facts.program.get("steps", ()) if s.get("type") == "HoldStep"}
    absent = [str(name) for number, name in planned.items() if number not in {h.number for h in facts.holds}]
    if absent:
        yield _condition("holds", False, f"{', '.join(absent)}: not begun")
    yield _condition("specimen connected", facts.proof.seen, facts.proof.text)
    if facts.entries_lost:
        yield _condition("record", False, f"at least {facts.entries_lost} entries of the record are lost")
    for reason in facts.reasons:
        if about_calibration(reason):
            yield _condition("calibration", False, f"under a reason about calibration: {reason.get('what', '')}: "
                                                   f"{reason.get('reason', '')} ({reason.get('by', 'no name')})")


def _condition(what: str, met: bool, text: str, rule: str = "condition of a pass") -> Judgement:
    return Judgement(what=what, decision=Decision.PASS if met else Decision.OPEN, rule=rule, text=text)


def about_calibration(reason: Json) -> bool:
    """Whether a reason on the record is about calibration: by its topic, or by its words where it has none."""
    topic = reason.get("topic")
    if topic:
        return str(topic) == "calibration"
    return "calibrat" in " ".join(str(reason.get(key, "")) for key in ("what", "text", "expected", "found")).lower()


def _ended(facts: Facts) -> Judgement:
    wanted = any(s.get("until_breakdown") for s in facts.program.get("steps", ()))
    done = facts.outcome == Outcome.FINISHED or (wanted and bool(facts.breakdowns)
                                                 and facts.outcome == Outcome.TRIPPED)
    text = f"the run ended as {facts.outcome}" + (f": {facts.why}" if facts.why else "")
    return _condition("run complete", done, text)


def _applied(hold: HoldResult) -> Judgement:
    """Whether a hold's voltage was applied as asked; what is short of it leaves the verdict open."""
    head = f"hold {hold.name!r}"
    if hold.mean is None:
        return _condition(head, False, "no usable sample", SIMPLE)
    text = (f"mean {_kv(hold.mean)} ({hold.mean.relative * 100:.2f} %), {hold.level_v / 1e3:.3f} kV "
            f"± {hold.tolerance * 100:g} % asked; inside for {hold.inside_s:.2f} s of {hold.asked_s:g} s")
    samples = max(1, hold.end_row - hold.begin_row)
    if hold.missing > MISSING_MAX * samples:
        return _condition(head, False, f"{text}; {hold.missing} samples missing", SIMPLE)
    if hold.mean.relative > U_LEVEL_MAX:
        return _condition(head, False, f"{text}; U is above {U_LEVEL_MAX * 100:g} %", SIMPLE)
    met = hold.level_met and hold.long_enough
    return _condition(head, met, text if met else f"{text}: not as asked", SIMPLE)


def _kv(value: Value) -> str:
    return f"{value.value / 1e3:.3f} kV ± {value.expanded / 1e3:.3f} kV"


def _ua(value: Value) -> str:
    return f"{value.value * 1e6:.4g} µA ± {value.expanded * 1e6:.2g} µA"
