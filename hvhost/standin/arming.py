"""From the arm request to the energised output: checks, press, proving, warning.

The checks are one table, in the order in which a refusal is chosen.  Every refusal of an arm is an event as well as
an answer, so the number of the last event that a retry must carry is another one.
"""

from collections.abc import Callable
from dataclasses import dataclass

from hvhost.standin.core import Core, Timer
from hvhost.wire.frames import Arm
from hvhost.wire.settings import BY_KEY
from hvhost.wire.vocabulary import (
    ERR_NUMBERS,
    Cause,
    CutWhy,
    Err,
    EventKind,
    Fitted,
    Inputs,
    McuState,
    VoidWhy,
)

REQUEST_MS = 30_000
PRESS_MIN_MS, PRESS_MAX_MS = 200, 3_000
PROVE_MS = 1_000
MEANS = Fitted.INHIBIT | Fitted.CLEAR | Fitted.RELAY
CONTACTS = Fitted.GROUND_SWITCH | Fitted.GROUND_STICK
FED = Fitted.DANGER | Fitted.DANGER_FROM_RELAY
U32 = 0xFFFFFFFF


@dataclass(frozen=True, slots=True)
class Step:
    """One step of proving: outputs to drive, and what the read-backs under ``mask`` must then say."""

    inhibit: bool
    relay: bool
    mask: int
    want: int


def _looser(core: Core, arm: Arm) -> Err | None:
    settings = core.eeprom.settings
    if settings is None:
        return Err.BLANK
    for key, value in arm.tighter.items():
        setting = BY_KEY[key]
        if not setting.low <= value <= setting.high:
            return Err.RANGE
        if value > settings[key] if setting.arm == "lower" else value < settings[key]:
            return Err.LOOSER
    return Err.REACTION if arm.pause and core.reaction.refuse(arm.pause) else None


def _lacks(bit: Inputs, needs: int) -> Callable[[Core, Arm], bool]:
    return lambda core, arm: (not needs or bool(core.fitted & needs)) and not core.seen & bit


def _off_zero(core: Core, arm: Arm) -> bool:
    settings = core.eeprom.settings
    return bool(settings and core.fitted & Fitted.MONITOR_POWERED and abs(core.v) > settings["zeroband"])


CHECKS: tuple[tuple[Err, Callable[[Core, Arm], bool]], ...] = (
    (Err.STATE, lambda core, arm: core.state not in (McuState.OFF, McuState.REQUESTED)),
    (Err.BLANK, lambda core, arm: core.eeprom.settings is None),
    (Err.LATCHED, lambda core, arm: core.latched),
    (Err.LEASE, lambda core, arm: not core.lease.running),
    (Err.SETTINGS, lambda core, arm: core.eeprom.settings is None or arm.settings != core.eeprom.settings.checksum),
    (Err.EVENT, lambda core, arm: arm.event != core.stream.number),
    (Err.ARM, lambda core, arm: arm.arm != core.arms + 1 & U32),
    (Err.WORDS, lambda core, arm: bool(core.v_word or core.i_word)),
    (Err.QUEUE, lambda core, arm: bool(core.points.queue)),
    (Err.INTERLOCK, _lacks(Inputs.INTERLOCK, 0)),
    (Err.EMERGENCY, _lacks(Inputs.EMERGENCY, Fitted.EMERGENCY)),
    (Err.GROUNDING, _lacks(Inputs.GROUND_OPEN, CONTACTS)),
    (Err.AUXILIARY, _lacks(Inputs.AUXILIARY, Fitted.AUXILIARY)),
    (Err.POLARITY, _lacks(Inputs.POLARITY, Fitted.POLARITY)),
    (Err.DANGER, lambda core, arm: core.fitted & FED == FED and bool(core.seen & Inputs.DANGER)),
    (Err.ZERO, _off_zero),
    (Err.INPUT, lambda core, arm: bool(core.fitted & Fitted.ARM_INPUT and core.seen & Inputs.ARM_INPUT)),
)


class Arming:
    """The arm under way, from its acceptance to the moment it energises."""

    def __init__(self, core: Core) -> None:
        self.core = core
        self._pressed_at: int | None = None
        self._steps: list[Step] = []

    # ---------------------------------------------------------------- the request

    def request(self, arm: Arm) -> Err | None:
        """Accept an arm, or refuse it with an event; one accepted voids the old one that still waits for its press."""
        core = self.core
        refusal = self._refusal(arm)
        if refusal is not None:
            core.event(EventKind.REFUSED, arm.arm, ERR_NUMBERS[refusal])
            return refusal
        core.void(VoidWhy.NEW_ARM)
        self._accept(arm)
        return None

    def _refusal(self, arm: Arm) -> Err | None:
        core = self.core
        core.contacts.read()
        return next((err for err, stands in CHECKS if stands(core, arm)), None) or _looser(core, arm)

    def _accept(self, arm: Arm) -> None:
        core, settings = self.core, self.core.eeprom.settings
        if settings is None:
            raise AssertionError("an arm accepted without settings")
        core.arms = arm.arm
        core.armed = True
        core.tag = arm.tag
        core.proven = 0
        core.points.serial = 0
        core.adopt(settings.with_(**arm.tighter))
        core.rules.configure()
        core.reaction.arm(arm.pause)
        self._pressed_at = None
        core.enter(McuState.REQUESTED)
        core.event(EventKind.REQUESTED, arm.arm)
        if core.fitted & Fitted.ARM_INPUT:
            core.set_timer(Timer.REQUEST, core.now + core.config.ticks(REQUEST_MS))
        else:
            self._prove()

    # ---------------------------------------------------------------- the press

    def watch(self) -> None:
        """Each sample while requested or proving."""
        if self.core.state is McuState.REQUESTED:
            self._watch_press()
        elif self.core.state is McuState.PROVING:
            self._watch_step()

    def _watch_press(self) -> None:
        core, config = self.core, self.core.config
        pressed = bool(core.seen & Inputs.ARM_INPUT)
        if self._pressed_at is None:
            if pressed:
                self._pressed_at = core.now
            return
        held = core.now - self._pressed_at
        if held > config.ticks(PRESS_MAX_MS):
            core.event(EventKind.REFUSED, core.arms, ERR_NUMBERS[Err.INPUT])
            core.cut(CutWhy.PREPARING)
        elif not pressed:
            self._pressed_at = None
            if held >= config.ticks(PRESS_MIN_MS):
                core.event(EventKind.PRESSED, core.arms, held)
                self._prove()

    def expired(self) -> None:
        """No press in time."""
        self.core.cut(CutWhy.EXPIRED, void=VoidWhy.EXPIRED)

    # ---------------------------------------------------------------- proving

    def _prove(self) -> None:
        core, fitted = self.core, self.core.fitted
        core.stop_timer(Timer.REQUEST)
        steps = []
        if fitted & Fitted.INHIBIT:
            steps += [self._step(inhibit=False, relay=False), self._step(inhibit=True, relay=False)]
        if fitted & Fitted.RELAY and not core.opened:
            steps += [self._step(inhibit=True, relay=True), self._step(inhibit=True, relay=False)]
        steps.append(self._step(inhibit=True, relay=bool(fitted & Fitted.RELAY), final=True))
        self._steps = steps
        core.enter(McuState.PROVING)
        self._drive()

    def _step(self, *, inhibit: bool, relay: bool, final: bool = False) -> Step:
        """What each fitted read-back and the danger signal must say with the outputs so."""
        fitted = self.core.fitted
        mask = want = 0
        if fitted & Fitted.INHIBIT_BACK:
            mask |= Inputs.INHIBIT_BACK
            want |= Inputs.INHIBIT_BACK if inhibit else 0
        if fitted & Fitted.RELAY_BACK:
            mask |= Inputs.RELAY_BACK
            want |= Inputs.RELAY_BACK if relay else 0
        if fitted & FED == FED:
            mask |= Inputs.DANGER
            want |= Inputs.DANGER if relay else 0
        elif final and fitted & Fitted.DANGER:
            mask |= Inputs.DANGER
            want |= Inputs.DANGER
        return Step(inhibit, relay, mask, want)

    def _drive(self) -> None:
        core, step = self.core, self._steps[0]
        core.drive(inhibit=step.inhibit, clear=True, relay=step.relay)
        core.set_timer(Timer.PROVE, core.now + core.config.ticks(PROVE_MS))

    def _watch_step(self) -> None:
        core = self.core
        step = self._steps[0]
        if core.seen & step.mask != step.want:
            return
        if core.relay is False and len(self._steps) == 2:
            core.opened = True
        self._steps.pop(0)
        if self._steps:
            self._drive()
        else:
            core.stop_timer(Timer.PROVE)
            self._proven()

    def misfit(self) -> None:
        """A read-back or the danger signal did not follow in time."""
        self.core.stop_timer(Timer.PROVE)
        self.core.trip(Cause.CUT_PATH)

    def _proven(self) -> None:
        core, fitted = self.core, self.core.fitted
        core.proven = ((Fitted.INHIBIT if fitted & Fitted.INHIBIT and fitted & Fitted.INHIBIT_BACK else 0)
                       | (Fitted.RELAY if fitted & Fitted.RELAY and fitted & Fitted.RELAY_BACK else 0))
        core.event(EventKind.PROVEN, core.proven, fitted & MEANS)
        self._warn()

    # ---------------------------------------------------------------- warning and energising

    def _warn(self) -> None:
        core, settings = self.core, self.core.eeprom.settings
        if settings is None:
            raise AssertionError("a warning without settings")
        core.eeprom.keep(tag=core.tag, mark=1)
        core.rules.begin()
        ticks = core.config.ticks(settings["warn"])
        core.enter(McuState.WARNING)
        core.event(EventKind.WARNING, core.arms, ticks)
        core.set_timer(Timer.WARN, core.now + ticks)

    def energise(self) -> None:
        """The warning is over: release inhibit and clear from zero words; the first queued segment starts now."""
        core, settings = self.core, self.core.eeprom.settings
        core.stop_timer(Timer.WARN)
        if settings is None or core.v_word or core.i_word or core.state is not McuState.WARNING:
            raise AssertionError("energising from words that are not zero")
        core.drive(inhibit=True, clear=False, relay=core.relay)
        core.drive(inhibit=False, clear=False, relay=core.relay)
        core.enter(McuState.ENERGISED)
        core.event(EventKind.ENERGISED, core.arms)
        core.set_timer(Timer.LONGEST, core.now + settings["longest"] * core.config.tick_hz)
        core.points.start()
