"""Disruptive discharges of a run: where, at what voltage, who saw them, how fast the output was stopped.

V and I cannot tell puncture, flashover over a surface and sparkover of a gap apart, so the kind is what somebody who
looked has entered, and 'kind not inspected' until then.
"""

from dataclasses import dataclass, replace

import numpy as np

from hvhost.measure.uncertainty import Value, scale_u
from hvhost.record.data import RunData
from hvhost.record.entries import Json
from hvhost.wire.frames import McuEvent
from hvhost.wire.vocabulary import Cause, EventKind, HostRule

BEFORE, AFTER = 12, 4  # rows around the deciding sample in which the fall is looked for
LEVEL_ROWS = 5  # the voltage before the fall is the median of these
FALL_PART = 0.1  # the fall begins at the first row that is this part of it below all before
SAME_S = 0.05  # what two observers report within this is one discharge
NOT_INSPECTED = "kind not inspected"
DISCHARGES = Cause.BREAKDOWN | Cause.ARC_COUNT | Cause.ARC_IN_REST


@dataclass(frozen=True, slots=True, kw_only=True)
class Breakdown:
    """One disruptive discharge; ``to_stop_s`` is the longest time that its stop can have taken, None where none came.

    The discharge began after the last sample that had not fallen; from there to the MCU's stop is an upper bound.
    """

    row: int
    fall_row: int  # the first row below the level
    index: int
    at_s: float  # since the first row
    volts: Value
    seen_by: tuple[str, ...]
    arc: int  # number within the arm, 0 where it latched at once
    to_stop_s: float | None
    kind: str = NOT_INSPECTED


def breakdowns_of(run: RunData) -> tuple[Breakdown, ...]:
    """Return every discharge in order of time, each once, whoever saw it."""
    seen = sorted(_seen(run))
    out: list[Breakdown] = []
    for row, who, arc in seen:
        at_s = float(run.seconds(row, row + 1)[0])
        if out and at_s - out[-1].at_s <= SAME_S:
            last = out[-1]
            out[-1] = replace(last, seen_by=tuple(sorted({*last.seen_by, who})), arc=last.arc or arc)
            continue
        fall_row, volts = voltage_before(run, row)
        out.append(Breakdown(row=row, fall_row=fall_row, index=int(run.index(row, row + 1)[0]), at_s=at_s, volts=volts,
                             seen_by=(who,), arc=arc, to_stop_s=_to_stop(run, fall_row)))
    return tuple(out)


def _seen(run: RunData) -> set[tuple[int, str, int]]:
    """Return (row, who saw it, arc number) of everything that says breakdown."""
    found: set[tuple[int, str, int]] = set()
    if not run.rows:
        return found
    # a host's verdict that made the arc has no arc to merge with; one that came after the MCU's own has
    merged = {event.a for event in run.events if event.kind == EventKind.MERGED}
    judged = {int(note.get("index", 0)) & 0x7FFFFFFF for note in _host_verdicts(run)}
    for event in run.events:
        if event.kind == EventKind.PAUSING:
            if not _only_overcurrent(run, event):
                by = "host" if event.a not in merged and event.b & 0x7FFFFFFF in judged else "MCU"
                found.add((run.row_of(event.b, 31), by, event.a))
        elif event.kind == EventKind.CAUSE and event.a & DISCHARGES:
            found.add((run.row_of(event.b, 31), "MCU", 0))
        elif event.kind == EventKind.CAUSE and event.a == Cause.HOST_RULE and event.b == HostRule.BREAKDOWN:
            found.add((run.row_of_tick(event.tick), "host", 0))
    for note in _host_verdicts(run):
        found.add((run.row_of(int(note.get("index", 0))), "host", 0))
    last = run.rows - 1
    return {(min(row, last), who, arc) for row, who, arc in found}


def _host_verdicts(run: RunData) -> list[Json]:
    return [note for note in run.notes_of("verdict")
            if note.get("rule") == "breakdown" and note.get("severity") in ("trip", "arc")]


def _only_overcurrent(run: RunData, pausing: McuEvent) -> bool:
    """Whether a pause turned out to be an overcurrent without a collapse: that latched, and is no discharge."""
    at_s = run.seconds_of_tick(pausing.tick)
    soon = [e for e in run.events if e.kind == EventKind.CAUSE and 0.0 <= run.seconds_of_tick(e.tick) - at_s <= SAME_S]
    return (any(e.a & Cause.OVERCURRENT for e in soon)
            and not any(e.a & DISCHARGES or (e.a & Cause.HOST_RULE and e.b == HostRule.BREAKDOWN) for e in soon))


def voltage_before(run: RunData, row: int) -> tuple[int, Value]:
    """Return the row at which the fall around a row begins, and the voltage just before it."""
    a, b = max(0, row - BEFORE), min(run.rows, row + AFTER)
    volts = run.volts(a, b)
    highest = np.maximum.accumulate(volts)
    below = highest - volts
    fall = int(np.argmax(below > FALL_PART * below.max())) if below.max() > 0.0 else len(volts)
    level = volts[max(0, fall - LEVEL_ROWS) : fall] if fall else volts[:1]
    value = float(np.median(level))
    scatter = float(level.std(ddof=1)) if len(level) > 1 else 0.0
    return a + fall, Value(value, float(np.hypot(scale_u(run.meta.voltage, value), scatter)))


def _to_stop(run: RunData, fall_row: int) -> float | None:
    last = max(0, fall_row - 1)
    at_s = float(run.seconds(last, last + 1)[0])
    stops = [s - at_s for e in run.events if e.kind in (EventKind.CUT, EventKind.PAUSING)
             and (s := run.seconds_of_tick(e.tick)) >= at_s]
    return min(stops) if stops else None
