"""Walks through a program: which segment comes next, when a hold's clock runs, what follows an arc pause.

The runner decides nothing about safety.  It is told what the MCU reports (segments accepted and started, the queue run
dry, pauses) and what was measured, in ticks, and answers with segments to queue and notes of what happened.  Time is
the MCU's tick alone, so a host that stalls or a clock that jumps moves no step.

Segments are counted by the serial numbers that the MCU gives them, so that an event which is lost and told again, or
an answer that comes after the event it belongs to, changes nothing.  What was ordered before an arc pause belongs to
another *stretch* and its answers count no more.
"""

from collections import deque

from hvhost.bench.model import Bench
from hvhost.plan.compiler import segments_for
from hvhost.plan.program import RAMP_START, HoldStep, Program, RampStep, RestStep, SegmentTarget, Step
from hvhost.supervisor.direct import AHEAD, SetPoint, next_piece
from hvhost.supervisor.holding import Holding
from hvhost.supervisor.notes import Doing, Measured, Note, Order, What

# members by names of this module: they are looked at for every block
HOLDING, PAUSED = Doing.HOLDING, Doing.PAUSED
STANDS = frozenset({Doing.PAUSED, Doing.DONE})
BEFORE_OR_AFTER = frozenset({Doing.WAITING, Doing.DONE})
REST_IN_PAUSE_S = 20.0  # a rest goes on inside a pause for so long; the MCU lets a pause expire 30 s after its rest


class Runner:
    """The position in one program."""

    def __init__(self, program: Program, bench: Bench, tick_hz: int, queue: int) -> None:
        self.program, self.bench, self.tick_hz = program, bench, tick_hz
        self.doing = Doing.WAITING
        self.at = 0  # index into the steps
        self.words = (0, 0)  # where the last queued segment ends
        self.tick = 0
        self.notes: list[Note] = []
        self.holding = Holding(tick_hz, self.notes)
        self.arcs_in_step = 0
        self.pause_ends: int | None = None
        self.v_breakdown = 0.0  # the highest readback before the last arc
        self.stretch = 0
        self.set_point: SetPoint | None = None  # direct runs
        self._ahead_max = min(queue, AHEAD) if program.kind == "direct" else queue
        self._pending: deque[SegmentTarget] = deque()
        self._arc: int | None = None  # to be carried by the next segment
        self._unanswered = 0
        self._accepted = self._started = 0  # serials
        self._dry: tuple[int, int, int] | None = None  # serial, tick, index: the queue ran dry behind this one
        self._step_begun = 0
        self._rest_begun: int | None = None
        self._origins: dict[str, int] = {}
        self._after_pause = Doing.RAMPING

    # ------------------------------------------------------------ what is asked of it

    @property
    def step(self) -> Step | None:
        """The step being worked on, None before the first and after the last."""
        return self.program.steps[self.at] if self.at < len(self.program.steps) else None

    @property
    def direct(self) -> bool:
        """Whether set-points come by hand."""
        return self.program.kind == "direct"

    @property
    def elapsed_s(self) -> float:
        """What the hold's clock shows."""
        return self.holding.elapsed_s

    @property
    def inside(self) -> bool:
        """Whether the mean lies inside the hold's tolerance."""
        return self.holding.inside

    @property
    def _ahead(self) -> int:
        """Segments that are ordered and have not started."""
        return self._unanswered + max(0, self._accepted - self._started)

    def orders(self) -> list[Order]:
        """Return the segments to queue now; the caller must send them all, in this order."""
        out: list[Order] = []
        if (not self._pending and self.set_point is None) or self.doing in STANDS:
            return out
        while self._ahead < self._ahead_max:
            if not self._pending and not self._refill():
                break
            target = self._pending.popleft()
            out.append(Order(target=target, stretch=self.stretch, arc=self._arc))
            self._arc, self._dry = None, None
            self._unanswered += 1
            self.words = (target.v, target.i)
        return out

    def take_notes(self) -> list[Note]:
        """Return and forget the notes so far."""
        notes = self.notes.copy()
        self.notes.clear()
        return notes

    def begin(self) -> None:
        """Prepare the first step's segments (the warning has begun)."""
        if self.doing is Doing.WAITING and self.program.steps and not self._pending and not self._ahead:
            self._load(self.program.steps[0])

    def head_for(self, goal: SetPoint) -> None:
        """Direct runs: head for this set-point from wherever the words are."""
        self.set_point = goal
        self._pending.clear()

    def stop(self) -> None:
        """The run ends: nothing more is ordered, no clock runs on."""
        self.doing = Doing.DONE
        self._pending.clear()

    # ------------------------------------------------------------ what it is told

    def accepted(self, serial: int, stretch: int) -> None:
        """The MCU took a segment of this stretch and gave it this serial number."""
        if stretch == self.stretch:
            self._unanswered = max(0, self._unanswered - 1)
            self._accepted = max(self._accepted, serial)
            self._look_dry()

    def not_taken(self, stretch: int) -> None:
        """The MCU did not take a segment, or never got it."""
        if stretch == self.stretch:
            self._unanswered = max(0, self._unanswered - 1)

    def energised(self, tick: int, index: int) -> None:
        """The warning is over; the first queued segment starts at this tick."""
        self._origins[RAMP_START] = tick
        self.tick = tick
        self._begin_step(tick, index)

    def segment_started(self, serial: int, tick: int) -> None:
        """A queued segment started, so there is room for one more."""
        self._started = max(self._started, serial)
        self.tick = max(self.tick, tick)

    def ran_dry(self, serial: int, tick: int, index: int) -> None:
        """The MCU's queue ran dry at ``tick`` after the segment ``serial``."""
        self._started = max(self._started, serial)
        self._dry = (serial, tick, index)
        self._look_dry()

    def paused(self, arc: int, tick: int, index: int) -> None:
        """An arc stopped the output: words are zero, the rest begins."""
        if self.doing is Doing.DONE:
            return
        self._pending.clear()
        self._started, self._unanswered, self._dry = self._accepted, 0, None
        self.stretch += 1
        self.words = (0, 0)
        self.arcs_in_step += 1
        self._arc = arc
        self.v_breakdown = self.holding.peak_v
        retreat, reaction = self.program.retreat, self.program.reaction
        rest_s = max(reaction.rest_s if reaction else 0.0, retreat.rest_s if retreat else 0.0)
        self.pause_ends = tick + round(rest_s * self.tick_hz) + 1
        if self.doing not in (Doing.RETREATING, Doing.PAUSED):
            self._after_pause = self.doing
        self.doing = Doing.PAUSED
        failed = self.holding.interrupted(self.step, tick, index) if isinstance(self.step, HoldStep) else ""
        if failed:
            self.fail(failed, index)
        elif retreat is None or self.arcs_in_step >= retreat.series:
            self._series_over(tick, index)

    def block(self, measured: Measured) -> None:
        """Take one judged block: clocks, readings, the end of rests and pauses."""
        step = self.step
        self.holding.observe(measured, step)
        self.tick = measured.tick + measured.ticks
        if self.doing in BEFORE_OR_AFTER:
            return
        if isinstance(step, HoldStep):
            self._hold(step, measured)
        elif self.doing is Doing.RESTING and isinstance(step, RestStep):
            self._rest(step, measured)
        if self.doing is PAUSED and self.pause_ends is not None and self.tick >= self.pause_ends:
            self._climb_again(measured.end_index)

    def fail(self, text: str, index: int = 0) -> None:
        """End the program as failed."""
        if self.doing is not Doing.DONE:
            self.stop()
            self.notes.append(Note(what=What.FAILED, tick=self.tick, index=index, step=self.step, text=text))

    # ------------------------------------------------------------ figures for the screen

    def next_reading_s(self) -> float | None:
        """Seconds until the next reading is due, None when none is."""
        return self.holding.next_reading_s(self.step, self.tick, self._origins)

    def pause_left_s(self) -> float | None:
        """Seconds until the output comes back by itself, None when not pausing."""
        ends, step = self.pause_ends, self.step
        if self._arc is None or ends is None or self.doing not in (Doing.PAUSED, Doing.RESTING):
            return None
        if self.doing is Doing.RESTING and isinstance(step, RestStep) and self._rest_begun is not None:
            rested = min(step.rest_s, (ends - self._rest_begun) / self.tick_hz + REST_IN_PAUSE_S)
            ends = self._rest_begun + round(rested * self.tick_hz)
        return max(0.0, (ends - self.tick) / self.tick_hz)

    # ------------------------------------------------------------ steps

    def _load(self, step: Step) -> None:
        self._pending.extend(segments_for(step, *self.words, self.bench, self.tick_hz))

    def _begin_step(self, tick: int, index: int) -> None:
        step = self.step
        if step is None:
            if self.direct:
                self.doing = Doing.HOLDING
            else:
                self._finish(tick, index, "the plan is complete")
            return
        queued = self.doing is Doing.WAITING  # the warning has queued the first step already
        self.arcs_in_step = 0
        self._step_begun, self._rest_begun = tick, None
        self._origins[step.name] = tick
        self.holding.begin(step)
        self.notes.append(Note(what=What.STEP_BEGUN, tick=tick, index=index, step=step))
        if not queued:
            self._load(step)
        self.doing = (Doing.RAMPING if isinstance(step, RampStep) else
                      Doing.HOLDING if isinstance(step, HoldStep) else Doing.RESTING)
        if not self._pending and not self._ahead:  # already where it leads
            self._arrived(tick, index)

    def _next_step(self, tick: int, index: int, text: str = "") -> None:
        self.notes.append(Note(what=What.STEP_ENDED, tick=tick, index=index, step=self.step, text=text))
        self.at += 1
        self._begin_step(tick, index)

    def _finish(self, tick: int, index: int, text: str) -> None:
        self.stop()
        self.notes.append(Note(what=What.FINISHED, tick=tick, index=index, text=text))

    def _refill(self) -> bool:
        """Direct runs: order the next piece of the way to the set-point; False when there."""
        if self.set_point is None:
            return False
        piece = next_piece(self.set_point, self.words, self.bench, self.tick_hz)
        if piece is None:
            return False
        self._pending.append(piece)
        self.doing = Doing.RAMPING
        return True

    def _look_dry(self) -> None:
        """Go on where the queue has run dry behind the very last segment that was ordered."""
        dry = self._dry
        if dry is None or self._pending or self._unanswered or dry[0] != self._accepted:
            return
        self._dry = None
        self._arrived(dry[1], dry[2])

    def _arrived(self, tick: int, index: int) -> None:
        """The words stand where the last order led."""
        if self.doing is Doing.RETREATING:
            self._retreated(tick, index)
        elif self.doing is Doing.RESTING:
            self._rest_begun = tick
        elif self.doing is Doing.RAMPING:
            if self.direct:
                self.doing = Doing.HOLDING
            else:
                self._next_step(tick, index)

    def _hold(self, step: HoldStep, measured: Measured) -> None:
        now = self.tick
        if self.doing is HOLDING:
            done, failed = self.holding.take(step, measured, self._origins)
            if failed:
                self.fail(failed, measured.end_index)
                return
            if done:
                self._next_step(now, measured.end_index)
                return
        if now - self._step_begun > round(step.at_most_s * self.tick_hz):  # pauses and retreats count
            self.fail(f"{step.place}: {step.name}: not held for {step.hold_s:g} s within at_most "
                      f"{step.at_most_s:g} s (clock at {self.elapsed_s:.1f} s)", measured.end_index)

    def _rest(self, step: RestStep, measured: Measured) -> None:
        now = measured.end_tick
        if self._rest_begun is not None and now - self._rest_begun >= round(step.rest_s * self.tick_hz):
            self._next_step(now, measured.end_index)
        elif (self._arc is not None and self.pause_ends is not None and not self._pending
              and now - self.pause_ends >= round(REST_IN_PAUSE_S * self.tick_hz)):
            # out of the pause before it expires, still at zero volts
            self._pending.append(SegmentTarget(v=0, i=self.words[1], ticks=1))

    # ------------------------------------------------------------ arcs

    def _series_over(self, tick: int, index: int) -> None:
        step = self.step
        if isinstance(step, RampStep) and step.until_breakdown:
            text = f"{self.arcs_in_step} breakdowns, the series is complete"
            self.notes.append(Note(what=What.STEP_ENDED, tick=tick, index=index, step=step, text=text))
            self.at += 1
            if self.step is None:
                self._finish(tick, index, "the plan is complete")
            else:
                self._after_pause = Doing.DONE  # nothing to climb back to: the next step starts from zero
        else:
            self.fail(f"{self.arcs_in_step} breakdowns in {step.name if step else 'the run'}", index)

    def _climb_again(self, index: int) -> None:
        """The rest is over: climb to below the breakdown, or begin the next step from zero."""
        step, retreat = self.step, self.program.retreat
        if self._after_pause is Doing.DONE or retreat is None or step is None:
            self._after_pause = self.doing = Doing.RAMPING
            self._begin_step(self.tick, index)
            return
        if isinstance(step, RestStep):
            self.doing, self._rest_begun = Doing.RESTING, self.tick
            return
        self.pause_ends = None
        top = step.to_v if isinstance(step, RampStep) else step.v
        target = min(retreat.target(self.v_breakdown), top)
        self.notes.append(Note(what=What.RETREAT, tick=self.tick, index=index, step=step, volts=target))
        self.doing = Doing.RETREATING
        self._climb_to(target, step)
        if not self._pending:
            self._retreated(self.tick, index)

    def _climb_to(self, volts: float, step: RampStep | HoldStep) -> None:
        slew = self.program.retreat.climb_v_per_s if self.program.retreat else self.bench.slew_v_per_s
        self._load(RampStep(number=step.number, name=f"{step.name}: retreat", place=step.place, limits=step.limits,
                            to_v=volts, slew_v_per_s=slew, limit_a=step.limit_a))

    def _retreated(self, tick: int, index: int) -> None:
        """The climb is over: go on with the step."""
        step = self.step
        if isinstance(step, HoldStep):
            self._climb_to(step.v, step)
            self.doing = Doing.RETREATING if self._pending else Doing.HOLDING
        elif step is not None:
            self.doing = Doing.RAMPING
            self._load(step)
            if not self._pending:
                self._arrived(tick, index)
