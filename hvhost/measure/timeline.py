"""What happened when: the steps of a run as stretches of rows, from the notes and the program."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from hvhost.record.data import RunData
from hvhost.record.entries import Json
from hvhost.wire.vocabulary import EventKind, McuState


@dataclass(frozen=True, slots=True, kw_only=True)
class StepSpan:
    """One step as it was run: rows ``begin`` to ``end`` (not included), and the row at which its clock last started."""

    number: int
    name: str
    kind: str  # 'ramp', 'hold', 'rest', 'retreat'
    step: Json  # the program's step, {} where it has none
    begin: int
    end: int
    clock: int | None
    restarts: int
    complete: bool  # its end was noted
    result: str

    def number_of(self, key: str, default: float = 0.0) -> float:
        """A number of the program's step."""
        value = self.step.get(key)
        return float(value) if isinstance(value, int | float) else default


def program_of(run: RunData) -> Json:
    """Return the compiled program, {} where the run has none."""
    return run.meta.program or {}


def steps_of(run: RunData) -> dict[int, Json]:
    """Return the program's steps by number."""
    return {int(step["number"]): step for step in program_of(run).get("steps", ())}


def last_live_row(run: RunData) -> int:
    """Return the row after the last one that the MCU took while energised."""
    live = np.flatnonzero(run.head["state"] == McuState.ENERGISED)
    return int(run.first[live[-1] + 1]) if len(live) else 0


def spans_of(run: RunData, falls: tuple[int, ...] = ()) -> tuple[StepSpan, ...]:
    """Return every step that began, in order.

    One that never ended reaches to the last energised row, or to the first of ``falls`` (rows at which a breakdown
    began) in it.
    """
    steps, spans = steps_of(run), []
    open_: dict[str, Any] | None = None
    for note in run.notes_of("step"):
        phase, row = note.get("phase"), run.row_of(int(note.get("index", 0)))
        if phase == "begin":
            if open_ is not None:
                spans.append(_span(open_, steps, row, note=None))
            open_ = {"number": int(note.get("number", 0)), "name": str(note.get("name", "")),
                     "kind": str(note.get("step_kind", "")), "begin": row, "clock": None, "restarts": 0}
        elif open_ is None:
            continue
        elif phase == "clock start":
            open_["clock"] = row
        elif phase in ("clock restart", "clock stop"):
            open_["restarts"] += 1
            open_["clock"] = None
        elif phase == "end":
            spans.append(_span(open_, steps, row, note))
            open_ = None
    if open_ is not None:
        end = min((row for row in falls if row > open_["begin"]), default=run.rows)
        spans.append(_span(open_, steps, max(open_["begin"], min(end, last_live_row(run))), note=None))
    return tuple(spans)


def _span(opened: Mapping[str, Any], steps: dict[int, Json], end: int, note: Json | None) -> StepSpan:
    step = steps.get(opened["number"], {})
    kinds = {"RampStep": "ramp", "HoldStep": "hold", "RestStep": "rest"}
    return StepSpan(
        number=opened["number"], name=opened["name"], kind=opened["kind"] or kinds.get(str(step.get("type")), ""),
        step=step, begin=opened["begin"], end=end, clock=opened["clock"], restarts=opened["restarts"],
        complete=note is not None, result=str(note.get("result", "")) if note is not None else "")


def time_on_s(run: RunData) -> float:
    """Return the seconds from the first energised tick to the last cut (or the last energised row)."""
    began = [e.tick for e in run.events if e.kind == EventKind.ENERGISED]
    live = np.flatnonzero(run.head["state"] == McuState.ENERGISED)
    if not began and not len(live):
        return 0.0
    start = run.seconds_of_tick(began[0]) if began else float(run.seconds(int(run.first[live[0]]))[0])
    cuts = [s for e in run.events if e.kind == EventKind.CUT and (s := run.seconds_of_tick(e.tick)) >= start]
    if cuts:
        return cuts[-1] - start
    rows = last_live_row(run)
    return float(run.seconds(rows - 1, rows)[0]) - start if rows else 0.0
