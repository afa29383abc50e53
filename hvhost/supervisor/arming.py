"""From a prepared run to its close: what forbids an arm, its request and answer, the end, the discharge."""

from typing import TYPE_CHECKING

from hvhost.guard.limits import limits_of
from hvhost.plan.program import Program
from hvhost.plan.segments import segments_for
from hvhost.supervisor.runs import ActiveRun, Outcome, Stage, rule_word
from hvhost.supervisor.states import LinkState, Move, Permission, Voltage
from hvhost.supervisor.stopping import cut_for, overdue
from hvhost.wire.events import Dropped
from hvhost.wire.frames import Arm, Ok, Refusal
from hvhost.wire.settings import Settings
from hvhost.wire.vocabulary import Err, Fitted, HostRule, Inputs
from hvhost.words.errors import CommandRefused

if TYPE_CHECKING:
    from hvhost.supervisor.core import Core

ARM_TRIES = 3  # an event between our look and the MCU's makes an arm stale; a fourth time something else is wrong
FOLLOW_MAX_S = 3600.0  # a discharge is followed at most this long
LEAST_S = 0.5  # what the MCU tells behind a cut (causes, a snapshot) belongs to the run's own record
CONTACTS: tuple[tuple[Inputs, Fitted, str], ...] = (
    (Inputs.INTERLOCK, Fitted(0), "interlock open"),
    (Inputs.EMERGENCY, Fitted.EMERGENCY, "emergency contact open"),
    (Inputs.GROUND_OPEN, Fitted.GROUND_STICK | Fitted.GROUND_SWITCH, "grounding device not in its open position"),
    (Inputs.AUXILIARY, Fitted.AUXILIARY, "auxiliary supplies low"),
    (Inputs.POLARITY, Fitted.POLARITY, "polarity contact disagrees"))
FED = Fitted.DANGER | Fitted.DANGER_FROM_RELAY


def obstacles(core: "Core") -> list[str]:
    """Everything that forbids arming now (S1), in words; empty when it may be asked."""
    state, inputs, fitted = core.state, core.inputs, core.bench.fitted
    out: list[str] = []
    if state.link is not LinkState.GREETED:
        out.append(f"link: {core.link_text}")
    sample = core.sample
    if state.latched or (sample is not None and sample.latched and sample.event >= core.last_event):
        out.append("latched: reset it by naming its causes")
    if state.permission is not Permission.IDLE:
        out.append(f"permission is {state.permission}")
    if not core.sampled:
        out.append("no sample seen yet")
    if not core.recorder_ready:
        out.append("the recorder is not ready")
    if core.link_stopping or core.stop_decided_s is not None:
        out.append("a stop is not confirmed yet")
    if core.evidence.fetching or core.aftermath.reading or core.aftermath.ready:
        out.append("what the MCU knows of an earlier run is being read and stored first")
    out += [text for bit, needs, text in CONTACTS if (not needs or fitted & needs) and not inputs & bit]
    if fitted & FED == FED and inputs & Inputs.DANGER:
        out.append("danger signal lit: the supply's power is on")
    if fitted & Fitted.ARM_INPUT and inputs & Inputs.ARM_INPUT:
        out.append("the arm input is pressed")
    return out


# ------------------------------------------------------------ the request


def request_arm(core: "Core", run: ActiveRun, who: str, now_s: float) -> int:
    """Send the arm of a prepared run; returns the request's ticket, raises `CommandRefused` naming every obstacle."""
    hindered = obstacles(core)
    if run.stage is not Stage.PREPARED or run.ended:
        hindered.append(f"the run is {run.outcome or run.stage}")
    if hindered:
        raise CommandRefused("a bench that may be armed", "; ".join(hindered), "arm")
    run.asked_by, run.arm_tries, run.why = who, 0, ""
    ticket = _send_arm(core, run)
    run.stage, run.requested_s, core.arm_open_s = Stage.ARMED, None, None
    return ticket


def _send_arm(core: "Core", run: ActiveRun) -> int:
    assert core.link is not None
    assert core.greeting is not None
    run.arm, run.arm_tries, run.arm_again = core.arm_count + 1, run.arm_tries + 1, False
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
    """The MCU's limits made as strict as this program allows, in words and codes; never looser than the settings.

    A limit that steps may set is tightened to the least strict of them, where every step sets it; the host's guard
    holds each step to its own.
    """
    bench = core.bench
    settings = core.greeting.settings if core.greeting else None
    if settings is None:
        return {}
    wanted = {"vmax": bench.voltage.program.code(program.v_highest),
              "imax": bench.current.program.code(program.i_highest)}
    limits = [step.limits for step in program.steps]
    volt, amp = bench.voltage.monitor.quantum, bench.current.monitor.quantum
    for key, per_code, values in (("oc", amp, [one.trip_a for one in limits]),
                                  ("ocl", amp, [one.level_a for one in limits]),
                                  ("oclms", 1e-3, [one.level_s for one in limits]),
                                  ("ov", volt, [one.v_over for one in limits])):
        given = [value for value in values if value is not None]
        if given and len(given) == len(values):
            wanted[key] = int(max(given) / per_code)
    if program.steps and program.reaction is None:
        wanted["vslew"] = _steepest(core, program)
    return {key: value for key, value in wanted.items() if _stricter(settings, key, value)}


def _stricter(settings: Settings, key: str, value: int) -> bool:
    return 0 < value < settings[key]


def _steepest(core: "Core", program: Program) -> int:
    """The steepest voltage segment of a program that nothing leads back to its beginning, in codes per second."""
    words, steepest = (0, 0), 1
    for step in program.steps:
        for target in segments_for(step, *words, core.bench, core.tick_hz):
            # |change| * tick rate <= slew * ticks is what the MCU asks for
            steepest = max(steepest, -(-abs(target.v - words[0]) * core.tick_hz // target.ticks))
            words = (target.v, target.i)
    return steepest


# ------------------------------------------------------------ its answer


def arm_answered(core: "Core", ticket: int, answer: Ok | Refusal, now_s: float) -> None:
    """The MCU took or refused the arm."""
    run = core.run
    if run is None or run.stage is not Stage.ARMED or ticket != run.arm_ticket:
        return
    if isinstance(answer, Ok):
        accepted(core, run, now_s)
    elif answer.code == Err.EVENT and run.arm_tries < ARM_TRIES and not run.ended:
        run.arm_again = True
    else:
        _not_armed(core, run, f"arm refused: {answer.code}", now_s)


def ask_again(core: "Core", run: ActiveRun, now_s: float) -> None:
    """Send a stale arm once more, as soon as every event is known up to the one that the last block told."""
    if not run.arm_again or core.events.missing:
        return
    try:
        _send_arm(core, run)
    except CommandRefused as error:
        _not_armed(core, run, f"arm not sent again: {error.found}", now_s)


def _not_armed(core: "Core", run: ActiveRun, why: str, now_s: float) -> None:
    core.say(now_s, "attention", why)
    core.arm_open_s, run.arm_again = None, False
    if run.ended:
        close(core, run, now_s)
    else:
        run.stage, run.why = Stage.PREPARED, why


def arm_dropped(core: "Core", event: Dropped, now_s: float) -> None:
    """The arm was given up.  Where it left, the MCU may have taken it: it is voided by a cut."""
    run = core.run
    core.say(now_s, "attention", f"arm given up: {event.why}")
    if run is None or run.stage is not Stage.ARMED or event.ticket != run.arm_ticket:
        return
    if event.sent and not core.link_stopping:
        cut_for(core, HostRule.OPERATOR, now_s, f"the arm was given up: {event.why}", Outcome.CANCELLED)
    run.end(Outcome.CANCELLED, f"the arm was given up: {event.why}")
    if core.state.permission is Permission.IDLE:
        off(core, core.sample.tick if core.sample is not None else 0, now_s)


def accepted(core: "Core", run: ActiveRun, now_s: float) -> None:
    """The MCU took the arm: told by its event, its answer or a block, whichever comes first."""
    if run.requested_s is not None:
        return
    core.arm_count = max(core.arm_count, run.arm)
    run.requested_s = core.arm_open_s = now_s
    core.move(Move.ARMED, now_s)
    press = "press the arm input at the bench within 30 s" if core.bench.arm_input else "no arm input on this bench"
    core.say(now_s, "attention", f"armed: {press}")


# ------------------------------------------------------------ the end


def off(core: "Core", tick: int, now_s: float) -> None:
    """The MCU is off: what was armed or live is over; follow the discharge."""
    run = core.run
    core.arm_open_s, core.warning_ends_tick = None, None
    if run is None or not run.open:
        return
    if run.stage is Stage.ARMED:
        run.end(Outcome.CANCELLED if not run.causes else Outcome.TRIPPED,
                run.cause_text() or "the arm was voided before anything was energised")
    elif run.cut_tick is None:
        run.cut_tick = tick
        core.discharge.cut(core.time_at(tick))
    run.runner.stop()
    run.stage = Stage.DISCHARGING
    if core.guard is not None:
        core.guard.with_limits(limits_of(core.bench, None, None, rate_hz=core.rate_hz))


def close_when_discharged(core: "Core", run: ActiveRun, now_s: float) -> None:
    """Close the run once the voltage is below, grounded, or as many bleed times as the bench asks have passed.

    A cut that is not confirmed in time holds the record open no longer than that: what the screens say of it stands.
    """
    if core.link is None or core.sample is None or core.evidence.fetching or core.events.missing:
        return
    if core.link_stopping and not overdue(core, now_s):
        return
    if run.energised_tick is None:
        close(core, run, now_s)
        return
    passed = core.discharge.bleeds_passed(core.time_at(core.sample.tick)) or 0.0
    since_s = passed * core.bench.bleed_s
    if since_s < LEAST_S:
        return
    told = core.state.voltage in (Voltage.BELOW, Voltage.GROUNDED)
    waited = passed >= core.bench.bleeds and core.state.voltage is Voltage.UNKNOWN
    if told or waited or since_s >= FOLLOW_MAX_S:
        close(core, run, now_s)


def close(core: "Core", run: ActiveRun, now_s: float) -> None:
    """The run is over and followed; the shell closes its record."""
    if run.stage is Stage.CLOSED:
        return
    if run.outcome is None:  # a cause that latched has named it already
        run.end(*((Outcome.CANCELLED, "never armed") if run.cut_tick is None and run.energised_tick is None
                  else (Outcome.INTERRUPTED, "the MCU went off by itself")))
    run.runner.stop()
    run.stage = Stage.CLOSED
    if run.energised_tick is not None:
        core.interlock_opened = False  # from here on an opening counts for the next specimen
    if core.stop_decided_s is not None:
        core.note(now_s, "cut", confirmed=False)
    core.note(now_s, "run closed", outcome=str(run.outcome), why=run.why, causes=run.causes, host_rule=run.host_rule,
              interfering=interfering(core), voltage=str(core.state.voltage), text=core.discharge.text)
    core.say(now_s, "note", f"run {run.spec.run_id} closed: {run.outcome}: {run.why}")


def interfering(core: "Core") -> dict[str, int]:
    """Samples that were beyond a limit without being enough to trip, by rule; zeros left out."""
    counts = core.guard.interfering if core.guard is not None else {}
    return {rule_word(rule): count for rule, count in counts.items() if count}
