"""The commands that the core takes: one function each, in one table; each refuses whole or is done."""

from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, Any

from hvhost.supervisor import arming, driving, linking, stopping
from hvhost.supervisor.direct import SetPoint
from hvhost.supervisor.runner import Runner
from hvhost.supervisor.runs import ActiveRun, Outcome, RunSpec, Stage, rule_word
from hvhost.supervisor.states import LIVE, RUNNING, LinkState, Permission
from hvhost.wire.frames import Put, Reset, Save, Stored
from hvhost.wire.settings import KEYS, differences
from hvhost.wire.vocabulary import CAUSE_WORDS, HostRule, Inputs
from hvhost.words.errors import CommandRefused

if TYPE_CHECKING:
    from hvhost.supervisor.core import Core

Args = Mapping[str, Any]
Done = dict[str, Any]


def admit(core: "Core", name: str, args: Args) -> None:
    """Raise `CommandRefused` unless this command exists and its sender may give it."""
    if name not in COMMANDS:
        raise CommandRefused(f"one of {', '.join(COMMANDS)}", repr(name)[:60], "command")
    if name in NEED_SEAT:
        core.seat.require(str(args.get("ticket", "")))


def open_run(core: "Core", spec: RunSpec, now_s: float) -> ActiveRun:
    """Prepare a run; refused while another one is open."""
    if core.run is not None and core.run.stage is not Stage.CLOSED:
        raise CommandRefused("no open run", f"{core.run.spec.run_id} is {core.run.stage}", "run",
                             "wait for its end, or cancel it")
    if core.greeting is None or core.state.link is not LinkState.GREETED:
        raise CommandRefused("a greeted link", core.link_text, "run")
    info = core.greeting.info
    linking.fresh_judgement(core)
    core.run = ActiveRun(spec=spec, runner=Runner(spec.program, core.bench, info.tick_hz, info.queue))
    core.say(now_s, "note", f"run {spec.run_id} prepared: {spec.plan}, specimen {spec.specimen}")
    return core.run


def _arm(core: "Core", now_s: float, args: Args, who: str) -> Done:
    run = core.run
    if run is None or run.stage is Stage.CLOSED:
        raise CommandRefused("a prepared run", "none", "arm", "prepare one with `hvhost run`")
    name = str(args.get("typed", ""))
    if not core.bench.arm_input and name != run.spec.run_id:
        raise CommandRefused(f"the run's name typed: {run.spec.run_id}", repr(name), "arm",
                             "this bench has no arm input, so the run's name must be typed")
    return {"ticket_number": arming.request_arm(core, run, who, now_s), "run": run.spec.run_id}


def _cancel(core: "Core", now_s: float, args: Args, who: str) -> Done:
    run = core.run
    if run is None or run.stage not in (Stage.PREPARED, Stage.ARMED):
        raise CommandRefused("a run that is prepared or armed and not energised", "none", "cancel",
                             "an energised run is stopped with `hvhost lower` or `hvhost cut`")
    why = str(args.get("why", ""))[:200] or f"cancelled by {who}"
    if run.stage is Stage.PREPARED:
        run.end(Outcome.CANCELLED, why)
        arming.close(core, run, now_s)
    else:
        stopping.cut_for(core, HostRule.OPERATOR, now_s, why, Outcome.CANCELLED)
        if core.state.permission is Permission.IDLE and core.sample is not None:
            arming.off(core, core.sample.tick, now_s)  # the arm had not been answered yet: the cut voids it
    return {"cancelled": run.spec.run_id}


def _set(core: "Core", now_s: float, args: Args, who: str) -> Done:
    run = core.run
    if (run is None or run.spec.kind != "direct" or core.state.permission not in RUNNING or run.ended
            or core.link_stopping):
        raise CommandRefused("an energised direct run that is not being stopped", str(core.state.permission), "set",
                             "arm one with `hvhost arm`")
    bench, program = core.bench, run.spec.program
    goal = SetPoint(
        volts=_within(args, "volts", min(bench.v_max, program.v_highest), "V", "set-point"),
        amps=_within(args, "amps", min(bench.i_max, program.i_highest), "A", "current limit"),
        slew_v_per_s=_within(args, "slew", bench.slew_v_per_s, "V/s", "slew", default=bench.slew_v_per_s))
    if goal.slew_v_per_s <= 0.0:
        raise CommandRefused("a slew above zero", f"{goal.slew_v_per_s:g} V/s", "slew")
    run.runner.head_for(goal)
    core.note(now_s, "set", volts=goal.volts, amps=goal.amps, slew=goal.slew_v_per_s, who=who)
    driving.drive(core, run, now_s)
    return {"volts": goal.volts, "amps": goal.amps, "slew": goal.slew_v_per_s}


def _within(args: Args, key: str, top: float, unit: str, what: str, default: float | None = None) -> float:
    """A number from 0 to ``top``, or `CommandRefused`; nothing is clipped in silence."""
    value = args.get(key)
    if value is None and default is not None:
        return default
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise CommandRefused(f"{key}: a number", type(value).__name__, what)
    if not 0.0 <= value <= top:  # also refuses what is not a number
        raise CommandRefused(f"0 to {top:g} {unit}", f"{value:g} {unit}", what, "stay within the bench's ceiling")
    return float(value)


def _lower(core: "Core", now_s: float, args: Args, who: str) -> Done:
    if core.link is None:
        raise CommandRefused("a link to the MCU", core.link_text, "lower", "use the emergency switching off")
    core.seat.stopped(str(args.get("ticket", "")), who)
    live = core.state.permission in LIVE
    stopping.lower_for(core, Outcome.LOWERED if live else Outcome.CANCELLED, f"lowered by {who}", now_s)
    return {"lowering": live}


def _cut(core: "Core", now_s: float, args: Args, who: str) -> Done:
    if core.link is None:
        raise CommandRefused("a link to the MCU", core.link_text, "cut", "use the emergency switching off")
    core.seat.stopped(str(args.get("ticket", "")), who)
    energised = core.run is not None and core.run.stage is Stage.LIVE
    return {"number": stopping.cut_for(core, HostRule.OPERATOR, now_s, f"cut by {who}",
                                       Outcome.CUT if energised else Outcome.CANCELLED)}


def _reset(core: "Core", now_s: float, args: Args, who: str) -> Done:
    given = args.get("causes", ())
    words = [str(word) for word in given] if isinstance(given, list | tuple) else []
    by_word = {word: int(cause) for cause, word in CAUSE_WORDS.items()}
    by_word[f"host: {rule_word(core.host_rule)}"] = by_word["host"]
    unknown = [word for word in words if word not in by_word]
    if unknown or not words:
        raise CommandRefused("the causes by their words: " + ", ".join(sorted(by_word)), ", ".join(unknown) or "none",
                             "reset", "see `hvhost status` for what is latched")
    if core.link is None or core.state.link not in (LinkState.GREETED, LinkState.OBSERVE):
        raise CommandRefused("a link to the MCU", core.link_text, "reset")
    mask = 0
    for word in words:
        mask |= by_word[word]
    grounded = bool(args.get("grounded"))
    core.note(now_s, "action", action="reset", causes=mask, grounded=grounded, who=who)
    return {"ticket_number": core.link.request(Reset(causes=mask, grounded=int(grounded)))}


def _seat_take(core: "Core", now_s: float, args: Args, who: str) -> Done:
    before = core.seat.take(who, str(args.get("ticket", "")), now_s, reason=str(args.get("reason", ""))[:200])
    core.say(now_s, "note", f"control: {who}" + (f", taken over from {before}" if before and before != who else ""))
    return {"holder": who}


def _seat_release(core: "Core", now_s: float, args: Args, who: str) -> Done:
    freed = core.seat.release(str(args.get("ticket", "")), now_s)
    if freed:
        core.say(now_s, "note", f"control released by {who}")
    return {"released": freed}


def _seat_acknowledge(core: "Core", now_s: float, args: Args, who: str) -> Done:
    core.seat.acknowledge(str(args.get("ticket", "")))
    core.say(now_s, "note", f"stop acknowledged by {who}")
    return {"acknowledged": True}


def _seat_check(core: "Core", now_s: float, args: Args, who: str) -> Done:
    """Whether this ticket has control; a stop that waits for its acknowledgement takes nothing away."""
    ticket = str(args.get("ticket", ""))
    if not core.seat.holds(ticket):
        core.seat.require(ticket)
    return {"holder": core.seat.holder.name if core.seat.holder else "", "stopped_by": core.seat.stopped_by}


def _stored(core: "Core", now_s: float, args: Args, who: str) -> Done:
    number = args.get("number")
    if core.link is None or not isinstance(number, int):
        raise CommandRefused("a link to the MCU and a snapshot's number", core.link_text, "stored")
    core.evidence.stored()
    return {"ticket_number": core.link.request(Stored(snapshot=number))}


def _commission(core: "Core", now_s: float, args: Args, who: str) -> Done:
    if core.link is None or core.greeting is None or core.state.permission is not Permission.IDLE:
        raise CommandRefused("an idle bench with a link", core.link_text, "commission")
    if core.sampled and core.inputs & Inputs.INTERLOCK:
        raise CommandRefused("the interlock open", "interlock closed", "commission",
                             "open the interlock: settings are written with it open only")
    wanted = core.bench.settings()
    there = core.greeting.settings
    keys = [key for key, _, _ in differences(wanted, there)] if there else list(KEYS)
    for key in keys:
        core.link.request(Put(key=key, value=wanted[key]))
    ticket = core.link.request(Save(checksum=wanted.checksum))
    core.say(now_s, "attention", f"settings written by {who}: {len(keys)} keys, checksum {wanted.checksum:08X}")
    return {"ticket_number": ticket, "keys": keys, "checksum": f"{wanted.checksum:08X}"}


COMMANDS: dict[str, Callable[["Core", float, Args, str], Done]] = {
    "arm": _arm,
    "cancel": _cancel,
    "set": _set,
    "lower": _lower,
    "cut": _cut,
    "reset": _reset,
    "seat.take": _seat_take,
    "seat.release": _seat_release,
    "seat.acknowledge": _seat_acknowledge,
    "seat.check": _seat_check,
    "stored": _stored,
    "commission": _commission,
}
NEED_SEAT = frozenset({"arm", "set", "reset", "commission"})
