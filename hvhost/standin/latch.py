"""The latch: causes with their evidence, kept in EEPROM, and the one way to clear them."""

from hvhost.standin.core import Core
from hvhost.wire.frames import Reset
from hvhost.wire.vocabulary import Cause, Err, EventKind, Fitted, Inputs, McuState

STABLE_MS = 100  # the interlock must have been closed for so long
INDEX_BITS = 0x7FFFFFFF  # an index in an event: its low 31 bits


class Latch:
    """Adds causes, checks and executes a reset."""

    def __init__(self, core: Core) -> None:
        self.core = core

    def add(self, causes: Cause, detail: int, *, snapshot: bool = True) -> None:
        """Store causes (the first with its tick, codes and the run's tag), tell each, take the snapshot if asked."""
        core, kept = self.core, self.core.eeprom.kept
        new = Cause(causes & ~kept.causes)
        if not new:
            return
        core.stream.close_block()
        rule = detail if new & Cause.HOST_RULE else kept.rule
        if kept.causes:
            core.eeprom.keep(causes=kept.causes | new, rule=rule)
        else:
            core.eeprom.keep(causes=int(new), first=int(new & -new), rule=rule, tick=core.wire_tick(core.now),
                             v_code=core.v_raw, i_code=core.i_raw, tag=kept.tag or core.tag)
        for cause in new:
            core.event(EventKind.CAUSE, cause, detail & INDEX_BITS)
        if snapshot:
            core.snapshot.trigger("trip")

    def reset(self, request: Reset) -> Err | None:
        """Clear the whole set, or say what stands against it; no output is operated."""
        refusal = self._against(request)
        if refusal is None:
            core = self.core
            core.stream.close_block()
            core.eeprom.keep(causes=0, first=0, rule=0, tick=0, v_code=0, i_code=0, tag=0, mark=0)
            core.event(EventKind.RESET, request.causes, request.grounded)
        return refusal

    def _against(self, request: Reset) -> Err | None:
        core, settings = self.core, self.core.settings
        core.contacts.read()
        if settings is None:
            return Err.BLANK
        if request.causes != core.eeprom.kept.causes:
            return Err.CAUSES
        if core.state is not McuState.OFF:
            return Err.STATE
        if core.v_word or core.i_word:
            return Err.WORDS
        if not self.in_cut_position():
            return Err.POSITION
        powered = core.fitted & Fitted.MONITOR_POWERED
        if powered and abs(core.v) > settings["zeroband"]:
            return Err.ZERO
        stable = core.now - core.contacts.interlock_since >= core.config.ticks(STABLE_MS)
        if not core.seen & Inputs.INTERLOCK or not stable:
            return Err.INTERLOCK
        if not (powered and core.fitted & Fitted.MONITOR_AT_SPECIMEN):
            if not request.grounded:
                return Err.GROUNDED
            if core.now - core.stopped_at < core.config.ticks(settings["bleed"] * settings["bleeds"]):
                return Err.BLEED
        return None

    def in_cut_position(self) -> bool:
        """Whether every fitted read-back is, now, where a cut leaves it."""
        fitted, seen = self.core.fitted, self.core.seen
        if fitted & Fitted.INHIBIT_BACK and not seen & Inputs.INHIBIT_BACK:
            return False
        if fitted & Fitted.RELAY_BACK and seen & Inputs.RELAY_BACK:
            return False
        fed = Fitted.DANGER | Fitted.DANGER_FROM_RELAY
        return not (fitted & fed == fed and seen & Inputs.DANGER)
