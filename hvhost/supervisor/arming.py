"""From a prepared run to the discharge after it: the arm's request, segments as the runner orders them, the close."""

from typing import TYPE_CHECKING, Any

from hvhost.guard.limits import limits_of
from hvhost.plan.program import HoldStep, Program, RampStep, RestStep, Step
from hvhost.supervisor.runner import Doing, Note, What
from hvhost.supervisor.runs import ActiveRun, Outcome, Stage
from hvhost.supervisor.states import LinkState, Move, Permission, Voltage
from hvhost.wire.frames import Arm, Ok, Refusal, Segment
from hvhost.wire.vocabulary import Err, Fitted, HostRule, Inputs
from hvhost.words.errors import CommandRefused

if TYPE_CHECKING:
    from hvhost.supervisor.core import Core

ARM_TRIES = 3  # an event between our look and the MCU's makes an arm stale; a fourth time something else is wrong
REQUEST_S = 30.0  # the MCU waits this long for the press
FOLLOW_MAX_S = 3600.0  # a discharge is followed at most this long
MOVES = {Doing.RAMPING: Move.RAMP_BEGUN, Doing.HOLDING: Move.HOLD_BEGUN, Doing.RETREATING: Move.RETREAT_BEGUN,
         Doing.RESTING: Move.REST_BEGUN}
PHASES = {What.STEP_BEGUN: "begin", What.STEP_ENDED: "end", What.CLOCK_STARTED: "clock start",
          What.CLOCK_RESTARTED: "clock stop"}


def obstacles(core: "Core") -> list[str]:
    """Everything that forbids arming now (S1), in words; empty when it may be asked."""
    state, inputs, fitted = core.state, core.inputs, core.bench.fitted
    out: list[str] = []
    if state.link is not LinkState.GREETED:
        out.append(f"link: {core.link_text}")
    if state.latched:
        out.append("latched: reset it by naming its causes")
    if state.permission is not Permission.IDLE:
        out.append(f"permission is {state.permission}")
    if not core.sampled:
        out.append("no sample seen yet")
    if not core.recorder_ready:
        out.append("the recorder is not ready")
    if core.link_stopping:
        out.append("a stop is not confirmed yet")
    for bit, needs, text in ((Inputs.INTERLOCK, None, "interlock open"),
                             (Inputs.EMERGENCY, Fitted.EMERGENCY, "emergency contact open"),
                             (Inputs.GROUND_OPEN, Fitted.GROUND_STICK | Fitted.GROUND_SWITCH,
                              "grounding device not in its open position"),
                             (Inputs.AUXILIARY, Fitted.AUXILIARY, "auxiliary supplies low"),
                             (Inputs.POLARITY, Fitted.POLARITY, "polarity contact disagrees")):
        if (needs is None or fitted & needs) and not inputs & bit:
            out.append(text)
    return out


def request_arm(core: "Core", run: ActiveRun, who: str, now_s: float) -> int:
    """Send the arm of a prepared run; returns the request's ticket, raises `CommandRefused` naming every obstacle."""
    hindered = obstacles(core)
    if run.stage is not Stage.PREPARED:
        hindered.append(f"the run is {run.stage}")
    if hindered:
        raise CommandRefused("a bench that may be armed", "; ".join(hindered), "arm")
    run.asked_by, run.arm_tries, run.stage, run.requested_s = who, 0, Stage.ARMED, None
    core.arm_open_s = None
    try:
        return _send_arm(core, run)
    except CommandRefused:
        run.stage = Stage.PREPARED
        raise


def _send_arm(core: "Core", run: ActiveRun) -> int:
    assert core.link is not None
    assert core.greeting is not None
    run.arm, run.arm_tries = core.arm_count + 1, run.arm_tries + 1
    program = run.spec.program
    pause = None
    if program.reaction is not None:
        reaction = program.reaction
        pause = (reaction.count, round(reaction.rest_s * 1000), round(reaction.window_s * 1000))
    run.arm_ticket = core.link.request(Arm(
        arm=run.arm, tag=run.spec.tag, settings=core.greeting.info.settings_checksum, event=core.last_event,
        pause=pause, tighter=tighter(core, program)))
    return run.arm_ticket


def tighter(core: "Core", program: Program) -> dict[str, int]:
    """The MCU's limits made as strict as this program allows, in words and codes."""
    bench = core.bench
    settings = core.greeting.settings if core.greeting else None
    if settings is None:
        return {}
    wanted = {"vmax": bench.voltage.program.code(program.v_highest),
              "imax": bench.current.program.code(program.i_highest)}
    trips = [step.limits.trip_a for step in program.steps]
    if trips and all(trip is not None for trip in trips):
        top = max(trip for trip in trips if trip is not None)
        wanted["oc"] = abs(round((top - bench.current.monitor.value(settings["izero"])) / bench.current.monitor.gain))
    return {key: value for key, value in wanted.items() if 0 < value < settings[key]}


def arm_answered(core: "Core", ticket: int, answer: Ok | Refusal, now_s: float) -> None:
    """The MCU took or refused the arm."""
    run = core.run
    if run is None or run.stage is not Stage.ARMED or ticket != run.arm_ticket:
        return
    if isinstance(answer, Ok):
        accepted(core, run, now_s)
        return
    if answer.code == Err.EVENT and run.arm_tries < ARM_TRIES:
        try:
            _send_arm(core, run)
        except CommandRefused as error:
            core.say(now_s, "attention", str(error))
        else:
            return
    core.say(now_s, "attention", f"the MCU refused to arm: {answer.code}")
    run.stage, core.arm_open_s = Stage.PREPARED, None
    run.why = f"arm refused: {answer.code}"


def accepted(core: "Core", run: ActiveRun, now_s: float) -> None:
    """The MCU took the arm: told by its event or by its answer, whichever comes first."""
    if run.requested_s is not None:
        return
    core.arm_count = run.arm
    run.requested_s = core.arm_open_s = now_s
    core.move(Move.ARMED, now_s)
    press = "press the arm input at the bench within 30 s" if core.bench.arm_input else "no arm input on this bench"
    core.say(now_s, "attention", f"armed: {press}")


def expire(core: "Core", now_s: float) -> None:
    """An arm request that nobody answered does not stand for ever."""
    run = core.run
    if (run is not None and run.stage is Stage.ARMED and core.state.permission is Permission.IDLE
            and run.requested_s is not None and now_s - run.requested_s > REQUEST_S + 2.0):
        run.end(Outcome.CANCELLED, "the arm expired")
        close(core, run, now_s)


def segment_answered(core: "Core", answer: Ok | Refusal, now_s: float) -> None:
    """The MCU took or refused a segment."""
    run = core.run
    if run is None:
        return
    if isinstance(answer, Ok):
        run.runner.accepted(int(answer.words[0]) if answer.words and answer.words[0].isdecimal() else -1)
    elif run.stage is Stage.LIVE and core.state.permission not in (
            Permission.PAUSING, Permission.LOWERING, Permission.IDLE) and not core.link_stopping:
        run.runner.fail(f"the MCU refused a segment: {answer.code}")
        drive(core, run, now_s)


def drive(core: "Core", run: ActiveRun, now_s: float) -> None:
    """Hand on what the runner noted, then queue what it orders."""
    for note in run.runner.take_notes():
        _noted(core, run, note, now_s)
    if core.link is None or core.link_stopping or run.ended or core.state.permission in (
            Permission.IDLE, Permission.REQUESTED, Permission.LOWERING):
        return
    move = MOVES.get(run.runner.doing)
    if move is not None and core.state.permission is not Permission.WARNING:
        if core.state.permission is not Permission.PAUSING:
            core.move(move, now_s)
    for order in run.runner.orders():
        target = order.target
        try:
            core.link.request(Segment(v=target.v, i=target.i, ticks=target.ticks, arc=order.arc))
        except CommandRefused as error:
            run.runner.fail(f"a segment could not be queued: {error}")
            return


def _noted(core: "Core", run: ActiveRun, note: Note, now_s: float) -> None:
    step = note.step
    place: dict[str, Any] = {"number": step.number if step else 0, "name": step.name if step else "",
                             "index": note.index, "tick": note.tick}
    if note.what is What.READING:
        core.note(now_s, "reading", **place, at_s=note.reading_s, volts=note.volts, amps=note.amps)
    elif note.what in PHASES:
        core.note(now_s, "step", **place, phase=PHASES[note.what], step_kind=_kind(step), result=note.text)
    else:
        core.note(now_s, "action", **place, action=str(note.what), text=note.text, volts=note.volts)
    if note.what is What.STEP_BEGUN and step is not None:
        core.say(now_s, "note", f"step {step.number + 1}: {step.name}")
        if core.guard is not None:
            core.guard.with_limits(limits_of(core.bench, run.spec.program, step, rate_hz=core.rate_hz))
    elif note.what is What.READING:
        core.say(now_s, "note", f"reading at {note.reading_s:g} s: {note.volts:.6g} V, {note.amps * 1e6:.5g} µA")
    elif note.what is What.FINISHED:
        core.lower_for(Outcome.FINISHED, note.text, now_s)
    elif note.what is What.FAILED:
        core.lower_for(Outcome.FAILED, note.text, now_s)
    elif note.text:
        core.say(now_s, "attention", note.text)


def _kind(step: Step | None) -> str:
    return "" if step is None else {RampStep: "ramp", HoldStep: "hold", RestStep: "rest"}[type(step)]


def off(core: "Core", tick: int, now_s: float) -> None:
    """The MCU is off: what was armed or live is over; follow the discharge."""
    run = core.run
    core.arm_open_s, core.warning_ends_tick = None, None
    if run is None or run.stage not in (Stage.ARMED, Stage.LIVE):
        return
    if run.stage is Stage.ARMED:
        run.end(Outcome.CANCELLED if not run.causes else Outcome.TRIPPED,
                run.cause_text() or "the arm was voided before anything was energised")
        run.stage = Stage.DISCHARGING
    else:
        run.stage = Stage.DISCHARGING
        if run.cut_tick is None:
            run.cut_tick = tick
            core.discharge.cut(tick / core.tick_hz)
    if core.guard is not None:
        core.guard.with_limits(limits_of(core.bench, None, None, rate_hz=core.rate_hz))


def close_when_discharged(core: "Core", run: ActiveRun, now_s: float) -> None:
    """Close the run once the voltage is below, grounded, or as many bleed times as the bench asks have passed."""
    if core.link_stopping or core.link is None or core.sample is None or core.evidence.fetching:
        return
    t_s = core.sample.tick / core.tick_hz
    if run.energised_tick is None:
        close(core, run, now_s)
        return
    passed = core.discharge.bleeds_passed(t_s) or 0.0
    if core.state.voltage in (Voltage.BELOW, Voltage.GROUNDED):
        close(core, run, now_s)
    elif passed >= core.bench.bleeds and (core.state.voltage is Voltage.UNKNOWN or passed * core.bench.bleed_s
                                          >= FOLLOW_MAX_S):
        close(core, run, now_s)


def close(core: "Core", run: ActiveRun, now_s: float) -> None:
    """The run is over and followed; the shell closes its record."""
    if run.stage is Stage.CLOSED:
        return
    if run.outcome is None:  # a cause that latched has named it already
        run.end(*((Outcome.CANCELLED, "never armed") if run.cut_tick is None and run.energised_tick is None
                  else (Outcome.INTERRUPTED, "the MCU went off by itself")))
    run.stage = Stage.CLOSED
    core.interlock_opened = False
    core.note(now_s, "run closed", outcome=str(run.outcome), why=run.why, causes=run.causes, host_rule=run.host_rule,
              interfering=interfering(core), voltage=str(core.state.voltage), text=core.discharge.text)
    core.say(now_s, "note", f"run {run.spec.run_id} closed: {run.outcome}: {run.why}")


def interfering(core: "Core") -> dict[str, int]:
    """Samples that were beyond a limit without being enough to trip, by rule; zeros left out."""
    counts = core.guard.interfering if core.guard is not None else {}
    return {HostRule(rule).name.lower().replace("_", " "): count for rule, count in counts.items() if count}


def step_text(run: ActiveRun) -> str:
    """What the run does now, in a line."""
    step = run.runner.step
    if step is None:
        return ""
    if isinstance(step, RampStep):
        return f"ramp to {step.to_v:g} V at {step.slew_v_per_s:g} V/s"
    if isinstance(step, HoldStep):
        return f"hold {step.v:g} V for {step.hold_s:g} s"
    return f"rest {step.rest_s:g} s"
