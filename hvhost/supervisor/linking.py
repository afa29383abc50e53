"""Greeting, losing and finding an MCU again; a new session is passive and resumes nothing (S4, S8)."""

from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from hvhost.bench.settings_from import compare_settings
from hvhost.guard.guard import Guard
from hvhost.guard.limits import limits_of
from hvhost.samples.assembler import Assembler
from hvhost.samples.blocks import Orientation
from hvhost.supervisor import arming
from hvhost.supervisor.runs import Outcome, Stage
from hvhost.supervisor.states import LinkState, Permission
from hvhost.wire.events import Ended
from hvhost.wire.frames import Again
from hvhost.wire.greeting import Greeting, McuInfo
from hvhost.wire.link import Link
from hvhost.wire.vocabulary import HostRule
from hvhost.words.errors import CommandRefused

if TYPE_CHECKING:
    from hvhost.supervisor.core import Core

BLANK = "settings blank or damaged: 'hvhost commission BENCH' writes them, with the interlock open"
RELINK_S = 0.5  # pause before a new session is tried


def begin(core: "Core", now_s: float) -> None:
    """Make a new session; a cut that was never confirmed goes on in it (as an operator's: its rule was told)."""
    if core.link is not None:
        core.next_stop = core.link.next_stop
    core.link = Link(now_s, session=core.new_session(), lease_ms=round(core.bench.lease_s * 1000),
                     first_stop=core.next_stop)
    if core.stop_decided_s is not None:
        core.link.cut(HostRule.OPERATOR, now_s)
    core.block_s, core.sampled, core.relink_at = now_s, False, None
    core.link_text = "greeting"


def greeted(core: "Core", greeting: Greeting, now_s: float) -> None:
    """The MCU has told what it is; first read what it knows of an earlier run."""
    adopt(core, greeting, now_s)
    info = greeting.info
    core.evidence.forget()
    if info.snapshot:
        core.evidence.begin(core, info.snapshot)
    first = core.aftermath.begin(info)
    if first is None or core.link is None:
        return
    try:
        core.link.request(Again(event=first))
    except CommandRefused:
        core.aftermath.answered()
    else:
        core.events.asked()


def adopt(core: "Core", greeting: Greeting, now_s: float) -> None:
    """Compare the MCU's settings, take over its causes and counters, follow its samples."""
    core.greeting = greeting
    info = greeting.info
    core.events.restart(info.event)
    core.arm_count, core.inputs_tick = info.arm, 0
    core.host_rule = info.rule
    core.state = replace(core.state, latched=info.causes)
    settings = greeting.settings or core.bench.settings()
    findings = compare_settings(core.bench, greeting.settings) if greeting.settings else ()
    core.settings_findings = findings
    strange = stranger(core.known, info)
    if not strange:
        core.known = info
    agreed = greeting.settings is not None and not findings and not strange
    core.state = replace(core.state, link=LinkState.GREETED if agreed else LinkState.OBSERVE)
    core.link_text = (f"greeted {info.firmware}, boot {info.boot}" if agreed else
                      "observe only: " + (strange or (BLANK if greeting.settings is None
                                                      else "; ".join(f.text for f in findings))))
    core.zeros(settings["vzero"], settings["izero"])
    core.block_span_s = info.block_pairs * info.sample_ticks / info.tick_hz
    core.discharge.unknown("no fall was seen: a low reading alone proves nothing")
    core.last_tick = None
    fresh_judgement(core)
    core.say(now_s, "note" if agreed else "attention", core.link_text)
    if info.causes:
        core.say(now_s, "attention", f"latched: {', '.join(info.cause_words)}")


def stranger(known: McuInfo | None, info: McuInfo) -> str:
    """Why this cannot be the board that was greeted before on the same port; '' where it can, or none was.

    A board keeps its firmware and never counts its boots down.  What these allow may still be another board of the
    same kind: then its settings decide, and people.
    """
    if known is None or (info.firmware == known.firmware and info.boot >= known.boot):
        return ""
    return (f"another board answers: {info.firmware}, boot {info.boot}; it was {known.firmware}, boot {known.boot}; "
            "if that is meant, end the daemon and start it again")


def fresh_judgement(core: "Core") -> None:
    """Begin samples and guard anew (at a greeting, and at a run's opening so that a replay can begin there)."""
    assert core.greeting is not None
    info = core.greeting.info
    orientation = Orientation.of(core.greeting.settings or core.bench.settings(), info)
    core.assembler = Assembler(orientation, info.tick_hz, info.sample_ticks, stale_s=core.bench.lease_s)
    core.guard = Guard(limits_of(core.bench, None, None, rate_hz=info.rate_hz))
    core.inputs_tick = 0


def again(core: "Core", now_s: float) -> None:
    """Open a new session soon: the settings changed."""
    if core.state.permission is Permission.IDLE:
        core.relink_at = now_s + RELINK_S


def ended(core: "Core", event: Ended, now_s: float) -> None:
    """The session is over: what ran is interrupted; a new session is tried after a pause."""
    lose(core, now_s, f"{event.why}: {event.text}" if event.text else str(event.why))
    core.relink_at = now_s + RELINK_S


def silent(core: "Core", age_s: float, now_s: float) -> None:
    """No line for a lease; a host that slept itself looks at what has come meanwhile before it believes that."""
    core.say(now_s, "attention", f"no line from the MCU for {age_s:.2f} s")
    core.silent = True
    look_silent(core, now_s)


def look_silent(core: "Core", now_s: float) -> None:
    """Hold a silent MCU lost: cut as long as anything may be energised, then try a new session."""
    if not core.silent or now_s - core.awake_s < core.bench.lease_s:
        return
    core.silent = False
    if core.link is not None and core.state.permission is not Permission.IDLE:
        core.link.cut(HostRule.STALE, now_s)
        core.stop_decided_s = now_s
    lose(core, now_s, "the MCU is silent")
    core.relink_at = now_s + RELINK_S


def lose(core: "Core", now_s: float, text: str) -> None:
    """The MCU is out of reach: a run ends as interrupted and is closed, and nothing may be said about the voltage."""
    core.link_text = text
    if core.state.link is not LinkState.LOST:
        core.say(now_s, "trip" if core.state.permission is not Permission.IDLE else "attention", f"link lost: {text}")
    core.state = replace(core.state, link=LinkState.LOST)
    core.silent, core.warning_ends_tick, core.arm_open_s = False, None, None
    core.evidence.forget()
    core.settle(now_s)
    run = core.run
    if run is not None and run.stage is not Stage.CLOSED:
        if run.stage is Stage.PREPARED:
            run.end(Outcome.CANCELLED, f"never armed: {text}")
        run.end(Outcome.INTERRUPTED, text)
        arming.close(core, run, now_s)


# ------------------------------------------------------------ for a replay


def opening_state(core: "Core") -> dict[str, Any]:
    """What a replay needs to begin where a run was opened."""
    assert core.link is not None
    return {"link": core.link.numbers(), "last_event": core.events.last, "arm_count": core.arm_count,
            "latched": core.state.latched, "host_rule": core.host_rule, "inputs": core.inputs,
            "interlock_opened": core.interlock_opened, "seat_held": core.seat.holder is not None}


def resume(core: "Core", greeting: Greeting, state: Mapping[str, Any], now_s: float, link: Link) -> None:
    """Stand where `opening_state` was taken: for a replay."""
    core.link, core.block_s, core.sampled = link, now_s, True
    adopt(core, greeting, now_s)
    core.events.restart(int(state["last_event"]))
    core.arm_count = int(state["arm_count"])
    core.host_rule, core.inputs = int(state["host_rule"]), int(state["inputs"])
    core.interlock_opened = bool(state["interlock_opened"])
    core.state = replace(core.state, latched=int(state["latched"]))
