"""What all parts of the MCU share: counters, outputs, timers, state; and the acts that every part may cause.

The parts (stream, setpoints, arming, rules, reaction, latch, lease, snapshot) hold this object and call each other
through it, as the parts of a firmware share one struct.  Everything that acts at ``now`` finds the plant advanced to
``now``.  All times are integer ticks, absolute; `wire_tick` gives the counter that passes on the line.
"""

from enum import IntEnum
from typing import TYPE_CHECKING

from hvhost.standin.board import Board, McuConfig
from hvhost.standin.eeprom import Eeprom
from hvhost.wire.settings import Settings
from hvhost.wire.vocabulary import Cause, CutWhy, EventKind, Fitted, Inputs, LowerWhy, McuState, VoidWhy

if TYPE_CHECKING:
    from hvhost.standin.arming import Arming
    from hvhost.standin.contacts import Contacts
    from hvhost.standin.fastrules import FastRules
    from hvhost.standin.latch import Latch
    from hvhost.standin.lease import Lease
    from hvhost.standin.reaction import Reaction
    from hvhost.standin.setpoints import Setpoints
    from hvhost.standin.snapshot import Snapshot
    from hvhost.standin.stream import Stream

U32 = 0xFFFFFFFF
NO_CAUSE = Cause(0)
LIVE = frozenset({McuState.WARNING, McuState.ENERGISED, McuState.PAUSING, McuState.LOWERING})
PREPARING = frozenset({McuState.REQUESTED, McuState.PROVING, McuState.WARNING})
SIGNAL_MS = 200  # the danger signal must follow the relay or the interlock within this
VOID_OF_LOWER = {LowerWhy.HOST: VoidWhy.LOWER, LowerWhy.LAPSE: VoidWhy.LAPSE, LowerWhy.SESSION: VoidWhy.SESSION}
CUT_OF_LOWER = {LowerWhy.HOST: CutWhy.HOST, LowerWhy.LAPSE: CutWhy.LAPSE, LowerWhy.SESSION: CutWhy.SESSION}


class Timer(IntEnum):
    """What the MCU may be waiting for; at one tick they are served in this order."""

    LEASE = 0
    DARK = 1
    SIGNAL = 2
    INTERLOCK = 3
    LONGEST = 4
    LOWER = 5
    PAUSE = 6
    REQUEST = 7
    PROVE = 8
    WARN = 9
    SEGMENT = 10
    INPUTS = 11


NEVER = 1 << 62


class Core:
    """The shared state, and lower, void, cut: the acts that end things."""

    stream: "Stream"
    points: "Setpoints"
    contacts: "Contacts"
    arming: "Arming"
    rules: "FastRules"
    reaction: "Reaction"
    latch: "Latch"
    lease: "Lease"
    snapshot: "Snapshot"

    def __init__(self, board: Board, eeprom: Eeprom, config: McuConfig) -> None:
        self.board = board
        self.eeprom = eeprom
        self.config = config
        self.now = 0
        self.clear_ram()

    def clear_ram(self) -> None:
        """Forget what RAM holds, as a reset does; outputs are as the wiring leaves them without an MCU."""
        self.epoch = self.now
        self.state = McuState.OFF
        self.live = False
        self.inhibit = self.clear = True
        self.relay = False
        self.v_word = self.i_word = 0
        self.v_cmd = self.i_cmd = 0.0
        self.index = self.config.first_index - 1  # of the last sample taken
        self.missed = 0
        self.v = self.i = 0  # oriented codes of the last sample
        self.v_raw = self.i_raw = 0
        self.seen = 0  # physical inputs at the last look
        self.tag = 0
        self.arms = 0  # arms accepted since boot
        self.armed = False
        self.proven = 0  # Fitted mask of the means proven for this arm
        self.opened = False  # the relay was seen to open since boot
        self.stopped_at = self.now  # the last cut
        self.timers: dict[Timer, int] = {}
        self.due = NEVER
        self.adopt(self.eeprom.settings)

    def adopt(self, settings: Settings | None) -> None:
        """Put settings in force: the EEPROM's, or those made stricter for one arm."""
        self.settings = settings
        self.fitted = settings["fitted"] if settings else 0
        self.v_sign = -1 if settings and settings["vmap"] < 0 else 1
        self.i_sign = -1 if settings and settings["imap"] < 0 else 1
        self.v_zero = settings["vzero"] if settings else 0
        self.i_zero = settings["izero"] if settings else 0

    # ---------------------------------------------------------------- time

    def wire_tick(self, tick: int) -> int:
        """The tick counter as it passes on the line: from the last boot, 32 bit."""
        return (tick - self.epoch + self.config.first_tick) & U32

    def sample_tick(self, index: int) -> int:
        """The absolute tick at which the sample with this unwrapped index was or will be taken."""
        return self.epoch + (index - self.config.first_index + 1) * self.config.sample_ticks

    def unwrap(self, index: int) -> int:
        """The unwrapped index nearest the last sample for its low 32 bits."""
        return self.index + (index - self.index + (1 << 31)) % (1 << 32) - (1 << 31)

    def set_timer(self, timer: Timer, tick: int) -> None:
        """Ask to be called at that tick."""
        self.timers[timer] = tick
        self.due = min(self.timers.values())

    def stop_timer(self, timer: Timer) -> None:
        """No longer ask."""
        if self.timers.pop(timer, None) is not None:
            self.due = min(self.timers.values(), default=NEVER)

    # ---------------------------------------------------------------- outputs

    def drive(self, *, inhibit: bool, clear: bool, relay: bool) -> None:
        """Set the outputs."""
        self.inhibit, self.clear, self.relay = inhibit, clear, relay
        self.board.drive(inhibit=inhibit, clear=clear, relay=relay)

    def apply_words(self, v_word: int, i_word: int) -> None:
        """Load both DAC words and apply them by one pulse (going up the current is loaded first, else the voltage)."""
        self.v_word, self.i_word = v_word, i_word
        self.v_cmd = v_word * self.config.v_volts_per_code
        self.i_cmd = i_word * self.config.i_volts_per_code

    def enter(self, state: McuState) -> None:
        """Change state; the open block is closed so that no block straddles two states."""
        self.stream.close_block()
        self.state = state
        self.live = state in LIVE

    def event(self, kind: EventKind, a: int = 0, b: int = 0) -> None:
        """Number an event, keep it, send it."""
        self.stream.event(kind, a, b)

    @property
    def latched(self) -> bool:
        """True while any cause stands."""
        return self.eeprom.kept.causes != 0

    @property
    def danger(self) -> bool:
        """The danger signal at the last look."""
        return bool(self.seen & Inputs.DANGER)

    @property
    def inputs(self) -> int:
        """Physical inputs, lease and proof: as a block carries them."""
        return (self.seen | (Inputs.LEASE if self.lease.running else 0) | (Inputs.PROVEN if self.proven else 0))

    # ---------------------------------------------------------------- acts

    def void(self, why: VoidWhy) -> None:
        """The arm is no more: limits, rule settings and arc reaction return to the EEPROM's."""
        if not self.armed:
            return
        self.armed = False
        self.adopt(self.eeprom.settings)
        self.rules.configure()
        self.reaction.disarm()
        self.event(EventKind.VOID, self.arms, why)

    def stop_output(self, *, relay: bool) -> None:
        """Inhibit, clear, words to zero, relay as asked, in this order in this tick; the queue is emptied."""
        had_relay = self.relay
        self.drive(inhibit=True, clear=True, relay=had_relay)
        self.apply_words(0, 0)
        self.points.empty()
        if had_relay and not relay:
            self.drive(inhibit=True, clear=True, relay=False)
        self.rules.stopped()

    def cut(self, why: CutWhy, *, number: int = 0, void: VoidWhy = VoidWhy.CUT, cause: Cause = NO_CAUSE,
            detail: int = 0) -> None:
        """The cut, always executed; outputs first, then the causes are stored, then the mark goes.

        It makes an event when it changed something; ``detail`` is the sample index or host rule behind ``cause``.
        """
        changed = self.state is not McuState.OFF or self.relay or not self.inhibit
        had_relay = self.relay
        self.stop_output(relay=False)
        for timer in (Timer.DARK, Timer.LONGEST, Timer.LOWER, Timer.PAUSE, Timer.REQUEST, Timer.PROVE, Timer.WARN):
            self.stop_timer(timer)
        if had_relay:
            self.opened = False
        if had_relay and self.fitted & Fitted.DANGER_FROM_RELAY:
            self.set_timer(Timer.SIGNAL, self.now + self.config.ticks(SIGNAL_MS))
        if changed:
            self.stopped_at = self.now
            self.enter(McuState.OFF)
            self.event(EventKind.CUT, why, number)
        self.void(void)
        self.proven = 0
        self.reaction.ended()
        if cause:
            self.latch.add(cause, detail)
        if self.eeprom.kept.mark:
            self.eeprom.keep(mark=0, tag=self.eeprom.kept.tag if self.latched else 0)

    def trip(self, cause: Cause, why: CutWhy = CutWhy.RULE, detail: int | None = None) -> None:
        """A latched cut."""
        self.cut(why, cause=cause, detail=self.index & 0x7FFFFFFF if detail is None else detail)

    def lower(self, why: LowerWhy, number: int = 0) -> None:
        """End what is under way by the gentlest means its state allows."""
        if self.state is McuState.ENERGISED:
            self.points.ramp_down()
            self.enter(McuState.LOWERING)
            self.event(EventKind.LOWERING, why, number)
            self.void(VOID_OF_LOWER[why])
            if not self.points.moving:
                self.cut(CutWhy.LOWERED)
        elif self.state is McuState.PAUSING:
            self.cut(CUT_OF_LOWER[why], number=number, void=VOID_OF_LOWER[why])
        elif self.state in PREPARING:
            self.cut(CutWhy.PREPARING, number=number, void=VOID_OF_LOWER[why])
