"""Between the runner and the wire: segments as it orders them, answers as it needs them, notes as people read them."""

from typing import TYPE_CHECKING, Any

from hvhost.guard.limits import limits_of
from hvhost.plan.program import HoldStep, RampStep, RestStep, Step
from hvhost.supervisor.notes import Doing, Note, What
from hvhost.supervisor.runs import ActiveRun, Outcome, Stage
from hvhost.supervisor.states import UNMOVED, Move, Permission
from hvhost.supervisor.stopping import lower_for
from hvhost.wire.events import Dropped, DropWhy
from hvhost.wire.frames import Ok, Refusal, Segment
from hvhost.words.errors import CommandRefused
from hvhost.words.quantities import Dimension, format_quantity

if TYPE_CHECKING:
    from hvhost.supervisor.core import Core

MOVES = {Doing.RAMPING: Move.RAMP_BEGUN, Doing.HOLDING: Move.HOLD_BEGUN, Doing.RETREATING: Move.RETREAT_BEGUN,
         Doing.RESTING: Move.REST_BEGUN}
PHASES = {What.STEP_BEGUN: "begin", What.STEP_ENDED: "end", What.CLOCK_STARTED: "clock start",
          What.CLOCK_RESTARTED: "clock stop"}
KINDS: dict[type[Step], str] = {RampStep: "ramp", HoldStep: "hold", RestStep: "rest"}
NOT_MOVED = frozenset({Permission.WARNING, Permission.PAUSING})  # the MCU leads out of these
NO_ORDERS = frozenset({Permission.IDLE, Permission.REQUESTED, Permission.LOWERING})


def drive(core: "Core", run: ActiveRun, now_s: float) -> None:
    """Hand on what the runner noted, then queue what it orders."""
    runner = run.runner
    if runner.notes:
        for note in runner.take_notes():
            _noted(core, run, note, now_s)
    link, permission = core.link, core.state.permission
    if link is None or permission in NO_ORDERS or run.outcome is not None or core.link_stopping:
        return
    move = MOVES.get(runner.doing)
    if move is not None and permission not in NOT_MOVED and (permission, move) not in UNMOVED:
        core.move(move, now_s)
    for order in runner.orders():
        target = order.target
        try:
            ticket = link.request(Segment(v=target.v, i=target.i, ticks=target.ticks, arc=order.arc))
        except CommandRefused as error:
            runner.fail(f"a segment could not be queued: {error}")
            return
        run.segments[ticket] = order.stretch


def segment_answered(core: "Core", ticket: int, asked: Segment, answer: Ok | Refusal, now_s: float) -> None:
    """The MCU took or refused a segment."""
    run = core.run
    if run is None or not run.open:
        return
    stretch = run.segments.pop(ticket, -1)
    runner = run.runner
    if isinstance(answer, Ok):
        word = answer.words[0] if answer.words else ""
        if not word.isdecimal():
            runner.not_taken(stretch)
            runner.fail("the MCU gave a segment no serial number")
        else:
            runner.accepted(int(word), stretch)
        drive(core, run, now_s)
        return
    runner.not_taken(stretch)
    stale = stretch != runner.stretch or core.link_stopping or run.ended or core.state.permission in NO_ORDERS
    if stale or (core.state.permission is Permission.PAUSING and asked.arc is None):
        return  # the MCU has stopped by itself meanwhile: its event tells why
    runner.fail(f"the MCU refused a segment: {answer.code}")
    drive(core, run, now_s)


def segment_dropped(core: "Core", event: Dropped, now_s: float) -> None:
    """A segment was given up; after a stop that was meant, unanswered it ends the run."""
    run = core.run
    if run is None or not run.open:
        return
    stretch = run.segments.pop(event.ticket, -1)
    run.runner.not_taken(stretch)
    if event.why is DropWhy.UNANSWERED and stretch == run.runner.stretch:
        run.runner.fail("the MCU did not answer a segment")
        drive(core, run, now_s)
    elif event.why is DropWhy.STALL:
        core.say(now_s, "attention", f"segment given up: {event.why}")


def _noted(core: "Core", run: ActiveRun, note: Note, now_s: float) -> None:
    step = note.step
    place: dict[str, Any] = {"number": step.number if step else 0, "name": step.name if step else "",
                             "index": note.index, "tick": note.tick}
    if note.what is What.READING:
        core.note(now_s, "reading", **place, at_s=note.reading_s, volts=note.volts, amps=note.amps)
    elif note.what in PHASES:
        core.note(now_s, "step", **place, phase=PHASES[note.what], step_kind=KINDS[type(step)] if step else "",
                  result=note.text)
    else:
        core.note(now_s, "action", **place, action=str(note.what), text=note.text, volts=note.volts)
    if note.what is What.STEP_BEGUN and step is not None:
        core.say(now_s, "note", f"step {step.number + 1}: {step.name}")
        if core.guard is not None and run.stage is Stage.LIVE:
            core.guard.with_limits(limits_of(core.bench, run.spec.program, step, rate_hz=core.rate_hz))
    elif note.what is What.READING:
        core.say(now_s, "note", f"reading at {note.reading_s:g} s: {_volts(note.volts, 6)}, "
                                f"{format_quantity(note.amps, Dimension.AMP, 5)}")
    elif note.what is What.FINISHED:
        lower_for(core, Outcome.FINISHED, note.text, now_s)
    elif note.what is What.FAILED:
        lower_for(core, Outcome.FAILED, note.text, now_s)
    elif note.text:
        core.say(now_s, "attention", note.text)


def step_text(run: ActiveRun) -> str:
    """What the run does now, in a line."""
    step = run.runner.step
    if step is None:
        return ""
    if isinstance(step, RampStep):
        return f"ramp to {_volts(step.to_v)} at {format_quantity(step.slew_v_per_s, Dimension.VOLT_PER_SECOND)}"
    if isinstance(step, HoldStep):
        return f"hold {_volts(step.v)} for {step.hold_s:g} s"
    return f"rest {step.rest_s:g} s"


def _volts(value: float, digits: int = 4) -> str:
    return format_quantity(value, Dimension.VOLT, digits)
