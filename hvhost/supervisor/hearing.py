"""What the core does with everything on the wire that is no block: answers, events, notices of the link."""

from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING

from hvhost.supervisor import arming
from hvhost.supervisor.runs import Outcome, Stage
from hvhost.wire.events import (
    Answered,
    CutConfirmed,
    Dropped,
    Ended,
    Escalated,
    EventIn,
    Fault,
    GarbledIn,
    Greeted,
    LinkEvent,
    Silent,
    StopAnswered,
)
from hvhost.wire.frames import Again, Arm, McuEvent, Ok, Refusal, Segment, Snap, encode_answer
from hvhost.wire.link import LinkState as WireState
from hvhost.wire.vocabulary import CAUSE_WORDS, Cause, CutWhy, EventKind, Inputs, LowerWhy, McuState
from hvhost.words.errors import CommandRefused

if TYPE_CHECKING:
    from hvhost.supervisor.core import Core

Act = Callable[["Core", McuEvent, int, float], None]

LOWER_WORDS: dict[int, str] = {LowerWhy.HOST: "asked for", LowerWhy.LAPSE: "host silent",
                               LowerWhy.SESSION: "a new session"}
CUTS: dict[int, CutWhy] = {int(why): why for why in CutWhy}
WORDS: dict[int, str] = {int(cause): word for cause, word in CAUSE_WORDS.items()}
INPUT_WORDS = {
    Inputs.INTERLOCK: ("interlock closed", "interlock open"),
    Inputs.EMERGENCY: ("emergency contact closed", "emergency contact open"),
    Inputs.GROUND_OPEN: ("grounding device in its open position", "grounding device not in its open position"),
    Inputs.DANGER: ("danger signal lit", "danger signal dark"),
    Inputs.AUXILIARY: ("auxiliary supplies good", "auxiliary supplies low"),
    Inputs.POLARITY: ("polarity contact agrees", "polarity contact disagrees"),
}


def hear(core: "Core", event: LinkEvent, now_s: float) -> None:
    """Take one event of the link."""
    if isinstance(event, EventIn):
        core.heard(event.event, now_s)
        mcu_event(core, event.event, now_s)
    elif isinstance(event, Answered):
        core.journal.line(now_s, encode_answer(event.answer))
        answered(core, event, now_s)
    elif isinstance(event, StopAnswered):
        core.journal.line(now_s, encode_answer(event.answer))
        core.note(now_s, "action", action=f"{event.verb} answered", number=event.number)
    elif isinstance(event, GarbledIn):
        core.journal.garbled(now_s, event.garbled.reason, event.garbled.size)
    elif isinstance(event, Greeted):
        core.greeted(event, now_s)
    elif isinstance(event, Ended):
        core.ended(event, now_s)
    elif isinstance(event, Dropped):
        dropped(core, event, now_s)
    elif isinstance(event, Escalated):
        core.stopping(now_s)
        core.say(now_s, "trip", f"{event.verb} was not answered: cut")
    elif isinstance(event, CutConfirmed):
        core.say(now_s, "note", "cut confirmed: answered, and every read-back is in its cut position")
    elif isinstance(event, Fault):
        core.say(now_s, "attention", f"the device said what it cannot mean: {event.what}")
    elif isinstance(event, Silent):
        core.say(now_s, "attention", f"no line from the MCU for {event.age_s:.2f} s")


def answered(core: "Core", event: Answered, now_s: float) -> None:
    """A request was answered."""
    frame, answer = event.request, event.answer
    core.reply(event.ticket, "ok" if isinstance(answer, Ok) else f"refused: {answer.code}")
    if isinstance(frame, Arm):
        arming.arm_answered(core, event.ticket, answer, now_s)
    elif isinstance(frame, Segment):
        arming.segment_answered(core, answer, now_s)
    elif isinstance(frame, Snap):
        core.evidence.part(core, answer, now_s)
    elif isinstance(answer, Refusal):
        core.say(now_s, "attention", f"the MCU refused {answer.verb}: {answer.code}")


def dropped(core: "Core", event: Dropped, now_s: float) -> None:
    """A request was given up."""
    core.reply(event.ticket, f"given up: {event.why}")
    run = core.run
    if isinstance(event.request, Arm) and run is not None and run.stage is Stage.ARMED and not event.sent:
        run.end(Outcome.CANCELLED, f"the arm was not sent: {event.why}")
        arming.close(core, run, now_s)
    elif isinstance(event.request, Arm | Segment):
        core.say(now_s, "attention", f"{type(event.request).__name__.lower()} given up: {event.why}")


def ask_events(core: "Core") -> None:
    """Ask again for the events that may tell which causes are latched."""
    link = core.link
    if link is None or link.state is not WireState.GREETED or link.waiting_requests or core.asked_again >= core.last_event:
        return
    core.asked_again = core.last_event
    try:
        link.request(Again(event=max(1, core.last_event - 15)))
    except CommandRefused:
        return


def mcu_event(core: "Core", event: McuEvent, now_s: float) -> None:
    """A numbered event: keep the count without gaps, then act on its kind."""
    fresh = event.number > core.last_event
    if fresh and event.number > core.last_event + 1 and core.last_event:
        core.say(now_s, "attention", f"events {core.last_event + 1} to {event.number - 1} are missing")
        core.note(now_s, "lost events", first=core.last_event + 1, last=event.number - 1)
    core.last_event = max(core.last_event, event.number)
    tick = core.assembler.clock.unwrap(event.tick, now_s) if core.assembler else event.tick
    if event.kind == EventKind.CAUSE:
        caused(core, event, tick, now_s)
    if not fresh:
        return
    if core.guard is not None:
        core.guard.heard(event.kind, tick)
    act = _ACTS.get(event.kind)
    if act is not None:
        act(core, event, tick, now_s)


def caused(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    """A cause latched (also told again, which changes nothing)."""
    cause = event.a & 0xFFFFFFFF
    if core.state.latched & cause:
        return
    core.state = replace(core.state, latched=core.state.latched | cause)
    if cause == Cause.HOST_RULE:
        core.host_rule = event.b
    word = WORDS.get(cause, f"cause {cause:X}")
    core.say(now_s, "trip", f"latched: {word}")
    run = core.run
    if run is not None and run.stage in (Stage.ARMED, Stage.LIVE, Stage.DISCHARGING):
        run.causes |= cause
        if cause == Cause.BREAKDOWN and run.arc_tick is None:
            run.arc_tick = tick
        if run.stage is not Stage.DISCHARGING or not run.ended:
            run.end(Outcome.TRIPPED, word)


def inputs_changed(core: "Core", inputs: int, now_s: float) -> None:
    """Contacts or read-backs moved."""
    changed = inputs ^ core.inputs
    core.inputs = inputs
    for bit, (on, off) in INPUT_WORDS.items():
        if changed & bit and core.sample is not None:
            core.say(now_s, "note" if inputs & bit else "attention", on if inputs & bit else off)
    if not inputs & Inputs.INTERLOCK:
        core.interlock_opened = True


def _requested(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    run = core.run
    if run is not None and run.stage is Stage.ARMED and event.a == run.arm:
        arming.accepted(core, run, now_s)
    core.mcu_in(McuState.REQUESTED, tick, now_s)


def _pressed(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.say(now_s, "note", f"pressed at the bench for {event.b / core.tick_hz:.2f} s")


def _proven(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.say(now_s, "note" if event.a else "attention",
             "cut path proven" if event.a else "cut path not proven: no read-back")


def _warning(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.warning_ends_tick = tick + event.b
    core.say(now_s, "attention", f"warning: energises in {event.b / core.tick_hz:.1f} s")
    core.mcu_in(McuState.WARNING, tick, now_s)
    if core.run is not None:
        core.run.runner.begin()
        arming.drive(core, core.run, now_s)


def _energised(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.warning_ends_tick = None
    core.mcu_in(McuState.ENERGISED, tick, now_s)
    run = core.run
    if run is not None and run.stage is Stage.ARMED:
        run.stage, run.energised_tick = Stage.LIVE, tick
        core.say(now_s, "attention", "energised")
        core.note(now_s, "energised", tick=tick, index=core.index_at(tick))
        run.runner.energised(tick, core.index_at(tick))
        arming.drive(core, run, now_s)


def _segment(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    if core.run is not None:
        core.run.runner.segment_started(tick)
        arming.drive(core, core.run, now_s)


def _hold(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    if core.run is not None:
        core.run.runner.ran_dry(event.a, tick, core.index_at(tick))
        arming.drive(core, core.run, now_s)


def _lowering(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    why = LOWER_WORDS.get(event.a, "unknown")
    core.say(now_s, "attention", f"lowering: {why}")
    core.mcu_in(McuState.LOWERING, tick, now_s)
    run = core.run
    if run is not None and run.stage is Stage.LIVE and event.a != LowerWhy.HOST:
        run.end(Outcome.INTERRUPTED, f"lowering: {why}")


def _pausing(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.mcu_in(McuState.PAUSING, tick, now_s)
    run = core.run
    if run is not None:
        run.arcs += 1
        index = core.index_at(tick)
        core.say(now_s, "trip", f"arc {event.a}: pausing")
        core.note(now_s, "arc", arc=event.a, seen_by="MCU", tick=tick, index=index, volts=run.runner.v_before)
        run.runner.paused(event.a, tick, index)
        arming.drive(core, run, now_s)


def _resumed(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.say(now_s, "attention", f"energised again after arc {event.a}")
    core.mcu_in(McuState.ENERGISED, tick, now_s)


def _cut(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    why = CUTS.get(event.a)
    core.say(now_s, "attention", f"cut: {why.name.lower().replace('_', ' ') if why else event.a}")
    core.note(now_s, "cut", tick=tick, index=core.index_at(tick), why=event.a, number=event.b)
    core.discharge.cut(tick / core.tick_hz)
    run = core.run
    if run is not None and run.stage in (Stage.ARMED, Stage.LIVE):
        run.cut_tick = tick
        if why in (CutWhy.LAPSE, CutWhy.SESSION, CutWhy.BOOT):
            run.end(Outcome.INTERRUPTED, f"cut: {why.name.lower()}")
    core.mcu_in(McuState.OFF, tick, now_s)


def _reset(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.state = replace(core.state, latched=0)
    core.host_rule = 0
    core.say(now_s, "note", "latch cleared" + (", grounded by hand declared" if event.b else ""))


def _snapshot(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.evidence.begin(core, event.a)


def _told(text: str) -> Act:
    def act(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
        core.say(now_s, "attention", text.format(a=event.a, b=event.b))

    return act


def _interfered(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.note(now_s, "interfered", rule=WORDS.get(event.a, str(event.a)), count=event.b, tick=tick)


def _off_seen(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.say(now_s, "note", f"seen with the output off, no trip: {WORDS.get(event.a, str(event.a))}")


def _void(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.note(now_s, "void", arm=event.a, why=event.b)


_ACTS: dict[str, Act] = {
    EventKind.REQUESTED: _requested,
    EventKind.PRESSED: _pressed,
    EventKind.PROVEN: _proven,
    EventKind.WARNING: _warning,
    EventKind.ENERGISED: _energised,
    EventKind.SEGMENT: _segment,
    EventKind.HOLD: _hold,
    EventKind.LOWERING: _lowering,
    EventKind.PAUSING: _pausing,
    EventKind.RESTRIKE: _told("re-strike {b} of arc {a}"),
    EventKind.MERGED: _told("the host's arc is arc {a}"),
    EventKind.RESUMED: _resumed,
    EventKind.CUT: _cut,
    EventKind.VOID: _void,
    EventKind.LAPSE: _told("the lease lapsed"),
    EventKind.SLOW_TO_FALL: _told("slow to fall"),
    EventKind.INTERFERED: _interfered,
    EventKind.OFF_SEEN: _off_seen,
    EventKind.RESET: _reset,
    EventKind.SAVED: _told("settings saved"),
    EventKind.SNAPSHOT: _snapshot,
    EventKind.LOST: _told("snapshot {a} lost"),
}

