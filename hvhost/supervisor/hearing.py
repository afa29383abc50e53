"""What the core does with everything on the wire that is no block: answers, events, notices of the link."""

from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING

from hvhost.supervisor import arming, driving, linking, stopping
from hvhost.supervisor.catchup import KEPT
from hvhost.supervisor.runs import Outcome, Stage, told_causes
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
from hvhost.wire.vocabulary import (
    CAUSE_WORDS,
    ERR_NUMBERS,
    Cause,
    CutWhy,
    Err,
    EventKind,
    HostRule,
    Inputs,
    LowerWhy,
    McuState,
)
from hvhost.words.errors import CommandRefused

if TYPE_CHECKING:
    from hvhost.supervisor.core import Core

Act = Callable[["Core", McuEvent, int, float], None]

LOWER_WORDS: dict[int, str] = {LowerWhy.HOST: "asked for", LowerWhy.LAPSE: "host silent",
                               LowerWhy.SESSION: "a new session"}
CUTS: dict[int, CutWhy] = {int(why): why for why in CutWhy}
WORDS: dict[int, str] = {int(cause): word for cause, word in CAUSE_WORDS.items()}
INDEX_BITS = 0x7FFFFFFF  # of a sample index in an event
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
        linking.greeted(core, event.greeting, now_s)
    elif isinstance(event, Ended):
        linking.ended(core, event, now_s)
    elif isinstance(event, Dropped):
        dropped(core, event, now_s)
    elif isinstance(event, Escalated):
        stopping.decided(core, now_s)
        core.say(now_s, "trip", f"{event.verb} was not answered: cut")
    elif isinstance(event, CutConfirmed):
        core.stop_decided_s = None
        core.note(now_s, "cut", number=event.number, confirmed=True)
        core.say(now_s, "note", "cut confirmed: answered, and every read-back is in its cut position")
    elif isinstance(event, Fault):
        core.say(now_s, "attention", f"the device said what it cannot mean: {event.what}")
    elif isinstance(event, Silent):
        linking.silent(core, event.age_s, now_s)


def answered(core: "Core", event: Answered, now_s: float) -> None:
    """A request was answered."""
    frame, answer = event.request, event.answer
    core.reply(event.ticket, "ok" if isinstance(answer, Ok) else f"refused: {answer.code}")
    if isinstance(frame, Arm):
        arming.arm_answered(core, event.ticket, answer, now_s)
    elif isinstance(frame, Segment):
        driving.segment_answered(core, event.ticket, frame, answer, now_s)
    elif isinstance(frame, Snap):
        core.evidence.part(core, answer, now_s)
    elif isinstance(frame, Again):
        core.events.done(gone=isinstance(answer, Refusal))
        core.aftermath.answered()
    elif isinstance(answer, Refusal):
        core.say(now_s, "attention", f"the MCU refused {answer.verb}: {answer.code}")


def dropped(core: "Core", event: Dropped, now_s: float) -> None:
    """A request was given up."""
    core.reply(event.ticket, f"given up: {event.why}")
    if isinstance(event.request, Arm):
        arming.arm_dropped(core, event, now_s)
    elif isinstance(event.request, Segment):
        driving.segment_dropped(core, event, now_s)
    elif isinstance(event.request, Snap):
        core.evidence.give_up(core, str(event.why), now_s)
    elif isinstance(event.request, Again):
        core.events.done()
        core.aftermath.answered()
    else:
        core.say(now_s, "attention", f"{type(event.request).__name__.lower()} given up: {event.why}")


def ask_events(core: "Core", now_s: float) -> None:
    """Ask again for events that are missing; write down those that are gone (8.9)."""
    book, link = core.events, core.link
    lost = book.settle()
    if lost:
        core.note(now_s, "lost events", first=lost[0], last=lost[-1], numbers=lost)
        core.say(now_s, "attention", f"events of the MCU are lost: {', '.join(map(str, lost))}")
    wanted = book.wanted()
    if wanted is None or link is None or link.state is not WireState.GREETED:
        return
    try:
        link.request(Again(event=wanted))
    except CommandRefused:
        return
    book.asked()


def ask_causes(core: "Core") -> None:
    """The MCU shows a latch whose causes are not known: have its last events told again, once."""
    book, link = core.events, core.link
    if link is None or link.state is not WireState.GREETED or book.asking or core.causes_asked == book.last:
        return
    core.causes_asked = book.last
    try:
        link.request(Again(event=max(1, book.last - KEPT + 1)))
    except CommandRefused:
        return
    book.asked()


def mcu_event(core: "Core", event: McuEvent, now_s: float) -> None:
    """A numbered event: keep the count without gaps, then act on its kind, late or not."""
    news, late = core.events.heard(event.number)
    core.aftermath.heard(event)
    tick = core.assembler.clock.unwrap(event.tick, now_s) if core.assembler else event.tick
    if event.kind == EventKind.CAUSE:
        caused(core, event, tick, now_s)
    if not news:
        return
    if core.guard is not None and not late:
        core.guard.heard(event.kind, tick)
    act = _ACTS.get(event.kind)
    if act is None:
        return
    core.late = late  # what is told late moves no state: newer blocks and events have
    try:
        act(core, event, tick, now_s)
    finally:
        core.late = False


def caused(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    """A cause latched (also told again, which changes nothing)."""
    cause = event.a & 0xFFFFFFFF
    if core.state.latched & cause:
        return
    core.state = replace(core.state, latched=core.state.latched | cause)
    if cause == Cause.HOST_RULE:
        core.host_rule = event.b
    word = ", ".join(told_causes(cause, core.host_rule)) or f"cause {cause:X}"
    core.say(now_s, "trip", f"latched: {word}")
    run = core.run
    if run is None or run.stage not in (Stage.ARMED, Stage.LIVE, Stage.DISCHARGING):
        return
    run.causes |= cause
    if cause == Cause.HOST_RULE:
        run.host_rule = event.b
    fell = cause == Cause.BREAKDOWN or (cause == Cause.HOST_RULE and event.b == HostRule.BREAKDOWN)
    if fell and run.arc_tick is None:
        run.arc_tick = tick
    # the events of one tick come as cut, void, cause: what latched with the cut ended the run, what latched after it
    # (a relay that does not open) is a cause on the record and no other end
    if run.open or not run.ended or run.cut_tick is None or tick <= run.cut_tick:
        run.end(Outcome.TRIPPED, word)


def inputs_changed(core: "Core", inputs: int, tick: int, now_s: float) -> None:
    """Contacts or read-backs as they were at this tick; what is older than what is known changes nothing."""
    if tick < core.inputs_tick:
        return
    core.inputs_tick = tick
    changed = inputs ^ core.inputs
    if not changed:
        return
    core.inputs = inputs
    for bit, (on, off) in INPUT_WORDS.items():
        if changed & bit and core.sample is not None:
            core.say(now_s, "note" if inputs & bit else "attention", on if inputs & bit else off)
    if not inputs & Inputs.INTERLOCK:
        core.interlock_opened = True


def _requested(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    run = core.run
    core.arm_count = max(core.arm_count, event.a)
    if run is not None and run.stage is Stage.ARMED and event.a == run.arm:
        arming.accepted(core, run, now_s)
    core.mcu_in(McuState.REQUESTED, tick, now_s)


def _refused(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    word = next((str(code) for code, number in ERR_NUMBERS.items() if number == event.b), str(event.b))
    core.note(now_s, "refused", arm=event.a, why=word)
    if word == Err.INPUT:
        core.say(now_s, "attention", "the arm input is stuck: pressed before the request, or for more than 3 s")


def _pressed(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.say(now_s, "note", f"pressed at the bench for {event.b / core.tick_hz:.2f} s")


def _proven(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.say(now_s, "note" if event.a else "attention",
             "cut path proven" if event.a else "cut path not proven: no read-back")


def _warning(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.warning_ends_tick = tick + event.b
    core.say(now_s, "attention", f"warning: energises in {event.b / core.tick_hz:.1f} s")
    core.mcu_in(McuState.WARNING, tick, now_s)
    if core.run is not None and core.run.stage is Stage.ARMED:
        core.run.runner.begin()
        driving.drive(core, core.run, now_s)


def _energised(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.warning_ends_tick = None
    core.mcu_in(McuState.ENERGISED, tick, now_s)
    run = core.run
    if run is not None and run.stage is Stage.ARMED:
        run.stage, run.energised_tick = Stage.LIVE, tick
        core.say(now_s, "attention", "energised")
        core.note(now_s, "energised", tick=tick, index=core.index_at(tick))
        run.runner.energised(tick, core.index_at(tick))
        driving.drive(core, run, now_s)


def _segment(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    run = core.run
    if run is not None and run.open:
        run.runner.segment_started(event.a, tick)
        driving.drive(core, run, now_s)


def _hold(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    run = core.run
    if run is not None and run.stage is Stage.LIVE and not run.ended:
        run.runner.ran_dry(event.a, tick, core.index_at(tick))
        driving.drive(core, run, now_s)


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
    if run is None or not run.open:
        return
    run.arcs = max(run.arcs + 1, event.a)
    by = "host" if event.b & INDEX_BITS in core.arcs_judged else "MCU"
    index, volts = core.index_at(tick), run.runner.holding.peak_v
    core.say(now_s, "trip", f"arc {event.a}: pausing")
    core.note(now_s, "arc", arc=event.a, seen_by=by, tick=tick, index=index, volts=volts)
    run.runner.paused(event.a, tick, index)
    driving.drive(core, run, now_s)


def _resumed(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.say(now_s, "attention", f"energised again after arc {event.a}")
    core.mcu_in(McuState.ENERGISED, tick, now_s)


def _cut(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    why = CUTS.get(event.a)
    core.say(now_s, "attention", f"cut: {why.name.lower().replace('_', ' ') if why else event.a}")
    core.note(now_s, "cut", tick=tick, index=core.index_at(tick), why=event.a, number=event.b)
    core.discharge.cut(core.time_at(tick))
    run = core.run
    if run is not None and run.stage in (Stage.ARMED, Stage.LIVE, Stage.DISCHARGING):
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


def _inputs(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    inputs_changed(core, event.a & 0xFFFFFFFF, tick, now_s)


def _saved(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.say(now_s, "attention", "settings saved: a new session reads them")
    linking.again(core, now_s)


def _interfered(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.note(now_s, "interfered", rule=WORDS.get(event.a, str(event.a)), count=event.b, tick=tick)


def _off_seen(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.say(now_s, "note", f"seen with the output off, no trip: {WORDS.get(event.a, str(event.a))}")


def _void(core: "Core", event: McuEvent, tick: int, now_s: float) -> None:
    core.note(now_s, "void", arm=event.a, why=event.b)


_ACTS: dict[str, Act] = {
    EventKind.REFUSED: _refused,
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
    EventKind.INPUTS: _inputs,
    EventKind.SAVED: _saved,
    EventKind.SNAPSHOT: _snapshot,
    EventKind.LOST: _told("snapshot {a} lost"),
}

