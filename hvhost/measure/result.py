"""Everything that one run tells, as one frozen value and as the JSON that is kept beside the record."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from hvhost.measure.breakdowns import Breakdown, breakdowns_of
from hvhost.measure.connected import Proof, RampResult, best_ramp, proof_of
from hvhost.measure.hold import HoldResult, measure_hold
from hvhost.measure.leakage import Reading, readings_of
from hvhost.measure.timeline import last_live_row, program_of, spans_of, time_on_s
from hvhost.measure.verdict import Decision, Facts, Judgement, judge
from hvhost.record.data import RunData
from hvhost.record.entries import Json, Outcome
from hvhost.record.meta import jsonable
from hvhost.wire.vocabulary import HOST_RULE_WORDS, Cause, CutWhy, EventKind, cause_words


@dataclass(frozen=True, slots=True, kw_only=True)
class Result:
    """What was applied, for how long, what leaked, whether and when it arced, why it stopped, and the verdict."""

    run: str
    outcome: str
    why: str
    causes: tuple[str, ...]
    verdict: Decision
    judgements: tuple[Judgement, ...]
    highest_v: float  # highest usable readback while energised
    breakdown_v: float | None
    time_on_s: float
    holds: tuple[HoldResult, ...]
    readings: tuple[Reading, ...]
    breakdowns: tuple[Breakdown, ...]
    ramp: RampResult | None
    proof: Proof
    pairs: int
    missing: int
    entries_lost: int

    def to_json(self) -> dict[str, Any]:
        """The result as plain JSON; values with uncertainty as value and u (k = 1)."""
        return {key: _untyped(item) for key, item in jsonable(self).items() if key != "type"}


def _untyped(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {key: _untyped(item) for key, item in value.items() if key != "type"}
    return [_untyped(item) for item in value] if isinstance(value, list) else value


def evaluate(run: RunData) -> Result:
    """Measure and judge a run."""
    breakdowns = breakdowns_of(run)
    spans = spans_of(run, tuple(b.fall_row for b in breakdowns))
    holds = tuple(measure_hold(run, s) for s in spans if s.kind == "hold" and s.end > s.begin)
    readings = readings_of(run, spans)
    ramp = best_ramp(run, spans)
    proof = proof_of(run, spans, ramp)
    outcome, why, causes = ending_of(run)
    lost = sum(d.entries for d in run.damage) + run.lost
    facts = Facts(outcome=outcome, why=why, program=program_of(run), holds=holds, readings=readings,
                  breakdowns=breakdowns, proof=proof, reasons=_reasons(run), entries_lost=lost)
    verdict, judgements = judge(facts)
    return Result(run=run.meta.run, outcome=outcome, why=why, causes=causes, verdict=verdict, judgements=judgements,
                  highest_v=_highest(run), breakdown_v=breakdowns[0].volts.value if breakdowns else None,
                  time_on_s=time_on_s(run), holds=holds, readings=readings, breakdowns=breakdowns, ramp=ramp,
                  proof=proof, pairs=run.rows, missing=run.missing, entries_lost=lost)


def _reasons(run: RunData) -> tuple[Json, ...]:
    given = (*run.meta.reasons, *run.notes_of("reason"))
    return tuple(r if isinstance(r, Mapping) else {"what": str(r)} for r in given)


def _highest(run: RunData) -> float:
    last = last_live_row(run)
    usable = run.usable(0, last)
    return float(run.volts(0, last)[usable].max()) if usable.any() else 0.0


def ending_of(run: RunData) -> tuple[str, str, tuple[str, ...]]:
    """Return outcome, reason in words and the latched causes: by the END entry, else by notes, else interrupted."""
    closed = next(iter(reversed(list(run.notes_of("run closed")))), {})
    end = run.end or {}
    outcome = str(end.get("outcome") or closed.get("outcome") or Outcome.INTERRUPTED.value)
    why = str(end.get("why") or closed.get("why") or _why(run))
    return outcome, why, causes_of(run)


def causes_of(run: RunData) -> tuple[str, ...]:
    """Return the latched causes in words, the host's with its rule."""
    latched = [e for e in run.events if e.kind == EventKind.CAUSE]
    words = {word: None for e in latched for word in cause_words(e.a & ~Cause.HOST_RULE)}
    names = {int(rule): word for rule, word in HOST_RULE_WORDS.items()}
    host = {f"host: {names.get(e.b, e.b)}": None for e in latched if e.a & Cause.HOST_RULE}
    return (*words, *host)


def _why(run: RunData) -> str:
    """Say why in the MCU's words where no closing note does."""
    if run.end is None:
        return "nothing closed this run"
    cuts = [e for e in run.events if e.kind == EventKind.CUT]
    if not cuts:
        return ""
    known = {int(why): why.name.lower().replace("_", " ") for why in CutWhy}
    return f"the MCU cut: {known.get(cuts[-1].a, str(cuts[-1].a))}"
