"""Walks through a program: which segment comes next, when a hold's clock runs, what follows an arc pause.

The runner decides nothing about safety.  It is told what the MCU reports (segments started, the queue run dry, pauses)
and what was measured, in ticks, and answers with segments to queue and notes of what happened.  Time is the MCU's
tick alone, so a host that stalls or a clock that jumps moves no step.
"""

from collections import deque
from dataclasses import dataclass, replace
from enum import StrEnum

from hvhost.bench.model import Bench
from hvhost.plan.compiler import segments_for
from hvhost.plan.program import (
    HOLD_START,
    RAMP_START,
    HoldClock,
    HoldStep,
    Program,
    RampStep,
    RestStep,
    SegmentTarget,
    Step,
    WhenOut,
)


class Doing(StrEnum):
    """What the runner is at."""

    WAITING = "waiting"  # not energised yet; the first segments may be queued
    RAMPING = "ramp"
    HOLDING = "hold"
    RETREATING = "retreat"
    RESTING = "rest"
    PAUSED = "pausing"
    DONE = "done"


class What(StrEnum):
    """Kinds of notes."""

    STEP_BEGUN = "step begun"
    STEP_ENDED = "step ended"
    CLOCK_STARTED = "clock started"
    CLOCK_RESTARTED = "clock restarted"
    READING = "reading"
    RETREAT = "retreat"
    FINISHED = "finished"
    FAILED = "failed"


@dataclass(frozen=True, slots=True, kw_only=True)
class Note:
    """One thing that happened in the program, at a tick; volts and amps are oriented means where they apply."""

    what: What
    tick: int
    index: int = 0
    step: Step | None = None
    text: str = ""
    volts: float = 0.0
    amps: float = 0.0
    reading_s: float = 0.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Order:
    """A segment to queue; ``arc`` only on the first one after a pause."""

    target: SegmentTarget
    arc: int | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Measured:
    """One block as the runner needs it: where it lies in time, and its sums in SI."""

    index: int
    tick: int
    ticks: int  # that the block spans
    pairs: int
    volts: float  # mean
    amps: float  # mean
    volts_max: float


DIRECT_PIECE_S = 0.25  # a direct run's ramps are queued in pieces this long, so that a new set-point soon acts
DIRECT_AHEAD = 2  # pieces queued ahead


class Runner:
    """The position in one program."""

    def __init__(self, program: Program, bench: Bench, tick_hz: int, queue: int) -> None:
        self.program, self.bench, self.tick_hz, self.queue = program, bench, tick_hz, queue
        self.doing = Doing.WAITING
        self.at = 0  # index into the steps
        self.words = (0, 0)  # where the last queued segment ends
        self.tick = 0
        self.notes: list[Note] = []
        self.arcs_in_step = 0
        self.elapsed_s = 0.0  # of the hold clock
        self.inside = False
        self.restarts = 0
        self.pause_ends: int | None = None
        self._pending: deque[SegmentTarget] = deque()
        self._arc: int | None = None  # to be carried by the next segment
        self._ahead = 0  # sent, not started
        self._last_serial = -1
        self._window: deque[Measured] = deque()
        self._step_begun = 0
        self._clock_begun: int | None = None
        self._origins: dict[str, int] = {}
        self._readings_due: deque[float] = deque()
        self._after_retreat: Doing = Doing.RAMPING
        self._v_target: float | None = None  # direct runs: where the set-point is going
        self._direct = (0.0, 0.0, 0.0)
        if program.kind == "direct":
            self._ahead_max = DIRECT_AHEAD
        else:
            self._ahead_max = queue

    # ------------------------------------------------------------ what is asked of it

    @property
    def step(self) -> Step | None:
        """The step being worked on, None before the first and after the last."""
        return self.program.steps[self.at] if self.at < len(self.program.steps) else None

    def orders(self) -> list[Order]:
        """Return the segments to queue now; the caller must send them all, in this order."""
        out: list[Order] = []
        if self.doing is Doing.PAUSED:
            return out
        while self._ahead < self._ahead_max:
            if not self._pending and not self._refill_direct():
                break
            target = self._pending.popleft()
            out.append(Order(target=target, arc=self._arc))
            self._arc = None
            self._ahead += 1
            self.words = (target.v, target.i)
        return out

    def take_notes(self) -> list[Note]:
        """Return and forget the notes so far."""
        notes, self.notes = self.notes, []
        return notes

    def begin(self) -> None:
        """Prepare the first step's segments (the warning has begun)."""
        if self.doing is Doing.WAITING and self.program.steps and not self._pending:
            self._load(self.program.steps[0])

    def set_direct(self, volts: float, amps: float, slew_v_per_s: float) -> None:
        """Direct runs: head for these set-points at this slew from wherever the words are."""
        self._direct = (volts, amps, slew_v_per_s)
        self._v_target = volts
        self._pending.clear()

    # ------------------------------------------------------------ what it is told

    def accepted(self, serial: int) -> None:
        """The MCU took a segment and gave it this serial number."""
        self._last_serial = serial

    def energised(self, tick: int, index: int) -> None:
        """The warning is over; the first queued segment starts at this tick."""
        self._origins[RAMP_START] = tick
        self.tick = tick
        self._begin_step(tick, index)

    def segment_started(self, tick: int) -> None:
        """A queued segment started, so there is room for one more."""
        self._ahead = max(0, self._ahead - 1)
        self.tick = max(self.tick, tick)

    def ran_dry(self, serial: int, tick: int, index: int) -> None:
        """The MCU's queue ran dry at ``tick`` after the segment ``serial``."""
        if serial != self._last_serial or self._pending or self._ahead:
            return
        if self.doing is Doing.RETREATING:
            self._retreated(tick, index)
        elif self.doing is Doing.RAMPING and self.program.kind != "direct":
            self._ramp_ended(tick, index)

    def paused(self, arc: int, tick: int, index: int) -> None:
        """An arc stopped the output: words are zero, the rest begins."""
        self._pending.clear()
        self._ahead = 0
        self.words = (0, 0)
        self.arcs_in_step += 1
        self._arc = arc
        rest_s = self.program.reaction.rest_s if self.program.reaction else 0.0
        if self.program.retreat:
            rest_s = max(rest_s, self.program.retreat.rest_s)
        self.pause_ends = tick + round(rest_s * self.tick_hz) + 1
        self._after_retreat = Doing.HOLDING if self.doing is Doing.HOLDING else (
            Doing.RESTING if self.doing is Doing.RESTING else
            self._after_retreat if self.doing is Doing.RETREATING else Doing.RAMPING)
        self.doing = Doing.PAUSED
        self.inside = False
        retreat = self.program.retreat
        if retreat is None or self.arcs_in_step >= retreat.series:
            self._series_over(tick, index)

    def block(self, measured: Measured) -> None:
        """Take one judged block: clocks, readings, the end of rests and pauses."""
        self._window.append(measured)
        self.tick = measured.tick + measured.ticks
        step = self.step
        span = round((step.window_s if isinstance(step, HoldStep) else 1.0) * self.tick_hz)
        while len(self._window) > 1 and self.tick - self._window[1].tick >= span:
            self._window.popleft()
        if self.doing is Doing.HOLDING and isinstance(step, HoldStep):
            self._hold(step, measured)
        elif self.doing is Doing.RESTING and isinstance(step, RestStep):
            if self.tick - self._step_begun >= round(step.rest_s * self.tick_hz):
                self._next_step(self.tick, measured.index + measured.pairs)
        elif self.doing is Doing.PAUSED and self.pause_ends is not None and self.tick >= self.pause_ends:
            self._climb_again(measured)

    # ------------------------------------------------------------ figures for the screen

    def next_reading_s(self) -> float | None:
        """Seconds until the next reading is due, None when none is."""
        step = self.step
        if not self._readings_due or not isinstance(step, HoldStep):
            return None
        origin = self._origin_tick(step)
        return None if origin is None else self._readings_due[0] - (self.tick - origin) / self.tick_hz

    def pause_left_s(self) -> float | None:
        """Seconds until the output comes back by itself, None when not pausing."""
        if self.doing is not Doing.PAUSED or self.pause_ends is None:
            return None
        return max(0.0, (self.pause_ends - self.tick) / self.tick_hz)

    # ------------------------------------------------------------ inside

    def _load(self, step: Step) -> None:
        self._pending.extend(segments_for(step, *self.words, self.bench, self.tick_hz))

    def _begin_step(self, tick: int, index: int) -> None:
        step = self.step
        if step is None:
            if self.program.kind == "direct":
                self.doing = Doing.RAMPING
                return
            self._finish(tick, index, "the plan is complete")
            return
        self.arcs_in_step = 0
        self._step_begun = tick
        self._clock_begun = None
        self.elapsed_s = 0.0
        self.inside = False
        self._origins[step.name] = tick
        self.notes.append(Note(what=What.STEP_BEGUN, tick=tick, index=index, step=step))
        if self.doing is not Doing.WAITING:
            self._load(step)
        self._readings_due = deque(step.readings_s if isinstance(step, HoldStep) else ())
        if isinstance(step, RampStep):
            self.doing = Doing.RAMPING
            if not self._pending and not self._ahead:  # already where it leads
                self._ramp_ended(tick, index)
        elif isinstance(step, HoldStep):
            self.doing = Doing.HOLDING
        else:
            self.doing = Doing.RESTING

    def _next_step(self, tick: int, index: int, text: str = "") -> None:
        self.notes.append(Note(what=What.STEP_ENDED, tick=tick, index=index, step=self.step, text=text))
        self.at += 1
        if self.doing is Doing.WAITING:
            self.doing = Doing.RAMPING
        self._begin_step(tick, index)

    def _ramp_ended(self, tick: int, index: int) -> None:
        self._next_step(tick, index)

    def _finish(self, tick: int, index: int, text: str) -> None:
        self.doing = Doing.DONE
        self.notes.append(Note(what=What.FINISHED, tick=tick, index=index, text=text))

    def fail(self, text: str, index: int = 0) -> None:
        """End the program as failed."""
        if self.doing is not Doing.DONE:
            self.doing = Doing.DONE
            self._pending.clear()
            self.notes.append(Note(what=What.FAILED, tick=self.tick, index=index, step=self.step, text=text))

    def _mean(self) -> tuple[float, float]:
        pairs = sum(m.pairs for m in self._window)
        volts = sum(m.volts * m.pairs for m in self._window) / pairs
        amps = sum(m.amps * m.pairs for m in self._window) / pairs
        return volts, amps

    def _origin_tick(self, step: HoldStep) -> int | None:
        return self._clock_begun if step.origin == HOLD_START else self._origins.get(step.origin)

    def _hold(self, step: HoldStep, measured: Measured) -> None:
        volts, amps = self._mean()
        now, index = self.tick, measured.index + measured.pairs
        inside = abs(volts - step.v) <= step.tolerance * abs(step.v)
        if inside and self._clock_begun is None:
            self._clock_begun = now
            self.notes.append(Note(what=What.CLOCK_STARTED, tick=now, index=index, step=step, volts=volts, amps=amps))
        elif step.clock is HoldClock.ACCUMULATE:
            self.elapsed_s += measured.ticks / self.tick_hz if inside and self.inside else 0.0
        elif inside and self._clock_begun is not None:
            self.elapsed_s = (now - self._clock_begun) / self.tick_hz
        elif self._clock_begun is not None and not self._out_of_tolerance(step, volts, index):
            return
        self.inside = inside
        self._take_readings(step, now, index, volts, amps)
        if self.elapsed_s >= step.hold_s and not self._readings_due:
            self._next_step(now, index)
        elif now - self._step_begun > round(step.at_most_s * self.tick_hz):
            self.fail(f"{step.place}: {step.name}: not held for {step.hold_s:g} s within at_most "
                      f"{step.at_most_s:g} s (clock at {self.elapsed_s:.1f} s)", index)

    def _out_of_tolerance(self, step: HoldStep, volts: float, index: int) -> bool:
        """Return whether the hold goes on (its clock anew); else it has failed."""
        text = (f"{step.place}: {step.name}: mean {volts:.6g} V outside {step.tolerance * 100:g} % of {step.v:g} V "
                f"after {self.elapsed_s:.1f} s")
        if step.when_out is WhenOut.FAIL:
            self.fail(text, index)
            return False
        self._clock_begun = None
        self.elapsed_s = 0.0
        self.restarts += 1
        self._readings_due = deque(step.readings_s)
        self.notes.append(Note(what=What.CLOCK_RESTARTED, tick=self.tick, index=index, step=step, text=text,
                               volts=volts))
        return True

    def _take_readings(self, step: HoldStep, now: int, index: int, volts: float, amps: float) -> None:
        origin = self._origin_tick(step)
        while self._readings_due and origin is not None:
            if (now - origin) / self.tick_hz < self._readings_due[0]:
                break
            due = self._readings_due.popleft()
            self.notes.append(Note(what=What.READING, tick=now, index=index, step=step, volts=volts, amps=amps,
                                   reading_s=due))

    def _series_over(self, tick: int, index: int) -> None:
        step = self.step
        if isinstance(step, RampStep) and step.until_breakdown:
            text = f"{self.arcs_in_step} breakdowns, the series is complete"
            self.notes.append(Note(what=What.STEP_ENDED, tick=tick, index=index, step=step, text=text))
            self.at += 1
            if self.step is None:
                self._finish(tick, index, "the plan is complete")
            else:
                self._after_retreat = Doing.DONE  # nothing to climb back to: the next step starts from zero
        else:
            self.fail(f"{self.arcs_in_step} breakdowns in {step.name if step else 'the run'}", index)

    def _climb_again(self, measured: Measured) -> None:
        step, retreat = self.step, self.program.retreat
        index = measured.index + measured.pairs
        self.pause_ends = None
        if self._after_retreat is Doing.DONE or retreat is None or step is None:
            self.doing = Doing.RAMPING
            self._begin_step(self.tick, index)
            return
        if isinstance(step, RestStep):
            self.doing = Doing.RESTING
            return
        target = retreat.target(self.v_before)
        top = step.to_v if isinstance(step, RampStep) else step.v
        climb = RampStep(number=step.number, name=f"{step.name}: retreat", place=step.place, limits=step.limits,
                         to_v=min(target, top), slew_v_per_s=retreat.climb_v_per_s, limit_a=step.limit_a)
        self._load(climb)
        self.notes.append(Note(what=What.RETREAT, tick=self.tick, index=index, step=step, volts=climb.to_v))
        self.doing = Doing.RETREATING
        if not self._pending:
            self._retreated(self.tick, index)

    def _retreated(self, tick: int, index: int) -> None:
        step = self.step
        if isinstance(step, HoldStep):
            back = RampStep(number=step.number, name=step.name, place=step.place, to_v=step.v,
                            slew_v_per_s=self.program.retreat.climb_v_per_s if self.program.retreat else 1.0,
                            limit_a=step.limit_a)
            if self.words[0] != self.bench.voltage.program.code(step.v):
                self._load(back)
                return
            self.doing = Doing.HOLDING
        elif step is not None:
            self.doing = Doing.RAMPING
            self._load(step)
            if not self._pending:
                self._ramp_ended(tick, index)

    @property
    def v_before(self) -> float:
        """The highest readback of the last blocks: what stood before the collapse."""
        return max((m.volts_max for m in list(self._window)[-6:]), default=0.0)

    def _refill_direct(self) -> bool:
        """Direct runs: make the next piece of the way to the set-point; False when there."""
        if self._v_target is None or self.program.kind != "direct":
            return False
        volts, amps, slew = self._direct
        goal = (self.bench.voltage.program.code(volts), self.bench.current.program.code(amps))
        if self.words == goal:
            return False
        ramp = RampStep(number=0, name="direct", place="set", to_v=volts, slew_v_per_s=slew, limit_a=amps)
        whole = segments_for(ramp, *self.words, self.bench, self.tick_hz)
        piece_ticks = round(DIRECT_PIECE_S * self.tick_hz)
        first = whole[0]
        if first.ticks > piece_ticks:
            v = self.words[0] + _part(first.v - self.words[0], piece_ticks, first.ticks)
            i = self.words[1] + _part(first.i - self.words[1], piece_ticks, first.ticks)
            first = replace(first, v=v, i=i, ticks=piece_ticks)
        self._pending.append(first)
        return True


def _part(delta: int, ticks: int, whole: int) -> int:
    """The share of ``delta`` after ``ticks`` of ``whole``, rounded towards zero like the wire's interpolation."""
    share = abs(delta) * ticks // whole
    return share if delta >= 0 else -share
