"""Contacts and read-backs: what a change means in each state, and the rules that are live always."""

from hvhost.standin.core import PREPARING, SIGNAL_MS, Core, Timer
from hvhost.wire.vocabulary import Cause, CutWhy, EventKind, Fitted, Inputs

DARK_MS = 50  # the danger signal may be dark for so long while power is commanded
TELL_MS = 10  # changes of inputs are told at most this often

# contact, what must be fitted for it to count (0: always there), the cause that its opening latches
OPENINGS: tuple[tuple[Inputs, int, Cause], ...] = (
    (Inputs.INTERLOCK, 0, Cause.INTERLOCK),
    (Inputs.EMERGENCY, Fitted.EMERGENCY, Cause.EMERGENCY),
    (Inputs.GROUND_OPEN, Fitted.GROUND_SWITCH | Fitted.GROUND_STICK, Cause.GROUNDING),
    (Inputs.AUXILIARY, Fitted.AUXILIARY, Cause.AUXILIARY),
)


class Contacts:
    """The last look at the inputs and since when the interlock stands as it does."""

    def __init__(self, core: Core) -> None:
        self.core = core
        self.interlock_since = core.now
        self._told = 0
        self._told_at = core.now
        self._open_v = 0

    def boot(self) -> None:
        """Take the first look after a reset; a danger signal that is lit has its time to go out."""
        core = self.core
        core.seen = self._told = core.board.inputs()
        self.interlock_since = core.now
        if core.seen & Inputs.DANGER and core.fitted & Fitted.DANGER_FROM_RELAY:
            core.set_timer(Timer.SIGNAL, core.now + core.config.ticks(SIGNAL_MS))

    def read(self) -> None:
        """Look now."""
        inputs = self.core.board.inputs()
        if inputs != self.core.seen:
            self.changed(inputs)

    def changed(self, inputs: int) -> None:
        """Act on what changed since the last look."""
        core = self.core
        before, core.seen = core.seen, inputs
        changed = before ^ inputs
        if changed & Inputs.INTERLOCK:
            self._interlock(bool(inputs & Inputs.INTERLOCK))
        if changed & Inputs.DANGER and core.fitted & Fitted.DANGER:
            self._danger(bool(inputs & Inputs.DANGER))
        opening = Inputs.RELAY_BACK if core.fitted & Fitted.RELAY_BACK else Inputs.DANGER
        if changed & opening and not inputs & opening and not core.relay:
            core.opened = bool(core.fitted & (Fitted.RELAY_BACK | Fitted.DANGER_FROM_RELAY))
        opened = Cause(0)
        for contact, needs, cause in OPENINGS:
            if changed & contact and not inputs & contact and (not needs or core.fitted & needs):
                opened |= cause
        if opened and core.live:
            core.trip(opened)
        elif opened and core.state in PREPARING:
            core.cut(CutWhy.PREPARING)
        if Timer.INPUTS not in core.timers:
            core.set_timer(Timer.INPUTS, max(core.now, self._told_at + core.config.ticks(TELL_MS)))

    def tell(self) -> None:
        """Tell what changed since the last telling."""
        core = self.core
        core.stop_timer(Timer.INPUTS)
        if core.seen != self._told:
            core.event(EventKind.INPUTS, core.seen, core.seen ^ self._told)
            self._told, self._told_at = core.seen, core.now

    def _interlock(self, closed: bool) -> None:
        core = self.core
        self.interlock_since = core.now
        if closed:
            core.stop_timer(Timer.INTERLOCK)
        else:
            self._open_v = core.v
            core.set_timer(Timer.INTERLOCK, core.now + core.config.ticks(SIGNAL_MS))

    def _danger(self, lit: bool) -> None:
        core = self.core
        if lit:
            core.stop_timer(Timer.DARK)
            if not core.relay and core.fitted & Fitted.DANGER_FROM_RELAY:
                core.set_timer(Timer.SIGNAL, core.now + core.config.ticks(SIGNAL_MS))
            return
        core.stop_timer(Timer.SIGNAL)
        if core.live and (core.relay or not core.fitted & Fitted.RELAY):
            core.set_timer(Timer.DARK, core.now + core.config.ticks(DARK_MS))

    def dark(self) -> None:
        """The danger signal was dark too long while power is commanded."""
        core = self.core
        core.stop_timer(Timer.DARK)
        if core.live:
            core.trip(Cause.DANGER_DARK)

    def signal(self) -> None:
        """The relay has been open long enough for the danger signal to be dark."""
        core = self.core
        core.stop_timer(Timer.SIGNAL)
        if core.seen & Inputs.DANGER and not core.relay:
            core.trip(Cause.POWER_STILL_ON)

    def interlock_check(self) -> None:
        """The interlock has been open long enough: the signal must be dark, the voltage below its bleed envelope."""
        core = self.core
        core.stop_timer(Timer.INTERLOCK)
        if core.seen & Inputs.INTERLOCK:
            return
        lit = core.fitted & Fitted.DANGER and core.seen & Inputs.DANGER
        samples = core.config.samples(SIGNAL_MS)
        high = core.fitted & Fitted.MONITOR_POWERED and core.v > core.rules.decayed(self._open_v, samples)
        if lit or high:
            core.trip(Cause.INTERLOCK_DID_NOT_CUT)
