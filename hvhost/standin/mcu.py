"""The MCU: bytes and ticks in, bytes and outputs out; it implements every clause of PROTOCOL.md.

Interface (ticks are ``config.tick_hz`` to the second, absolute, forward only):

``Mcu(plant, eeprom, config)``   plant is a `board.Board`; it boots at tick 0 by power-on
``feed(data, tick)``             bytes from the line; what they command acts at that tick (advances there first)
``advance_to(tick)``             let time pass: samples, segments, timers
``take_output() -> bytes``       lines for the host since last taken
``reset(cause)``                 a reset, now; ``hold_reset()`` the time before it is released; ``halted`` a dead MCU
``tick, state, latched, v_word, i_word``  what it does now

Inside it jumps from sample to sample and from timer to timer; between them nothing can happen but a command.
"""

from collections.abc import Callable

from hvhost.standin.arming import Arming
from hvhost.standin.board import Board, McuConfig
from hvhost.standin.contacts import Contacts
from hvhost.standin.core import PREPARING, Core, Timer
from hvhost.standin.eeprom import Eeprom
from hvhost.standin.fastrules import FastRules
from hvhost.standin.latch import Latch
from hvhost.standin.lease import Lease
from hvhost.standin.reaction import Reaction
from hvhost.standin.session import Session
from hvhost.standin.setpoints import Setpoints
from hvhost.standin.snapshot import Snapshot
from hvhost.standin.stream import Stream
from hvhost.wire.vocabulary import Cause, CutWhy, EventKind, McuState, ResetCause

__all__ = ["Eeprom", "Mcu", "McuConfig"]


class Mcu:
    """See the module's text; not thread-safe, deterministic from its calls."""

    def __init__(self, plant: Board, eeprom: Eeprom, config: McuConfig | None = None) -> None:
        self.config = config or McuConfig()
        self.core = Core(plant, eeprom, self.config)
        self.halted = False  # a dead or stopped MCU: outputs stand, nothing is served (a fault)
        self.miss = 0  # so many of the next conversions fail (a fault)
        self._plant_tick = 0
        self._sample_s = self.config.sample_ticks / self.config.tick_hz
        core = self.core
        core.stream = Stream(core)
        core.lease = Lease(core)
        core.contacts = Contacts(core)
        core.arming = Arming(core)
        core.snapshot = Snapshot(core)
        core.latch = Latch(core)
        core.points = Setpoints(core)
        core.rules = FastRules(core)
        core.reaction = Reaction(core)
        self.session = Session(core)
        self._served: dict[Timer, Callable[[], None]] = {}
        self.reset(ResetCause.POWER)

    # ---------------------------------------------------------------- what it does now

    @property
    def tick(self) -> int:
        """The absolute tick reached."""
        return self.core.now

    @property
    def state(self) -> McuState:
        """Its state."""
        return self.core.state

    @property
    def latched(self) -> Cause:
        """The latched causes, none when it is falsy."""
        return Cause(self.core.eeprom.kept.causes)

    @property
    def v_word(self) -> int:
        """The voltage word applied."""
        return self.core.v_word

    @property
    def i_word(self) -> int:
        """The current word applied."""
        return self.core.i_word

    # ---------------------------------------------------------------- bytes

    def feed(self, data: bytes, tick: int) -> None:
        """Advance to the tick, then obey these bytes."""
        self.advance_to(tick)
        if not self.halted:
            self.session.feed(data)

    def take_output(self) -> bytes:
        """Return and forget what was sent since the last call."""
        out = self.core.stream.out
        if not out:
            return b""
        data = bytes(out)
        out.clear()
        return data

    # ---------------------------------------------------------------- reset

    def hold_reset(self) -> None:
        """Reset is asserted: the wiring inhibits, the words are zero, nothing is served until `reset`."""
        self.halted = True
        self.core.apply_words(0, 0)
        self.core.drive(inhibit=True, clear=True, relay=False)

    def reset(self, cause: ResetCause) -> None:
        """Boot: the first act is the cut; then what the EEPROM kept is told, and the boot is latched."""
        core, eeprom = self.core, self.core.eeprom
        self.halted = False
        core.drive(inhibit=True, clear=True, relay=False)
        core.clear_ram()
        core.stream = Stream(core)
        core.lease = Lease(core)
        core.arming = Arming(core)
        core.points = Setpoints(core)
        core.rules = FastRules(core)
        core.reaction = Reaction(core)
        self._served = {
            Timer.LEASE: core.lease.lapse, Timer.DARK: core.contacts.dark, Timer.SIGNAL: core.contacts.signal,
            Timer.INTERLOCK: core.contacts.interlock_check, Timer.LONGEST: self._longest, Timer.LOWER: self._late,
            Timer.PAUSE: core.reaction.expired, Timer.REQUEST: core.arming.expired, Timer.PROVE: core.arming.misfit,
            Timer.WARN: core.arming.energise, Timer.SEGMENT: core.points.ended, Timer.INPUTS: core.contacts.tell}
        self.session.boot(cause)
        core.contacts.boot()
        self._next_sample = core.now + self.config.sample_ticks
        kept = eeprom.kept
        energised = kept.mark
        eeprom.keep(boots=kept.boots + 1, tag=kept.tag if energised or kept.causes or kept.snapshot else 0)
        core.event(EventKind.BOOT, cause, eeprom.kept.boots)
        core.snapshot.boot()
        core.latch.add(Cause.RESTARTED | (Cause.RESTARTED_ENERGISED if energised else Cause(0)), 0, snapshot=False)
        eeprom.keep(mark=0)

    # ---------------------------------------------------------------- time

    def advance_to(self, tick: int) -> None:
        """Let time pass up to and including this tick."""
        core = self.core
        if self._next_sample <= core.now:
            self._catch_up()
        while not self.halted:
            due = core.due
            if due <= self._next_sample and due <= tick:
                self._sync(due)
                timer = min((when, which) for which, when in core.timers.items())[1]
                self._served[timer]()
            elif self._next_sample <= tick:
                self._sample()
            else:
                break
        self._sync(tick)

    def _sync(self, tick: int) -> None:
        """Bring plant and words to this tick."""
        core = self.core
        if tick > self._plant_tick:
            core.board.advance((tick - self._plant_tick) / self.config.tick_hz, core.v_cmd, core.i_cmd)
            self._plant_tick = tick
        if tick > core.now:
            core.now = tick
            if core.points.moving and not self.halted:
                core.points.move()

    def _sample(self) -> None:
        """Take one pair: words, codes, inputs, rules, snapshot, block; every quiet sample passes here: keep it lean."""
        core = self.core
        at = self._next_sample
        step = self.config.sample_ticks
        self._next_sample = at + step
        board = core.board
        if at - self._plant_tick == step:
            board.advance(self._sample_s, core.v_cmd, core.i_cmd)
            self._plant_tick = core.now = at
            if core.points.moving:
                core.points.move()
        else:
            self._sync(at)
        core.index = index = core.index + 1
        if self.miss:
            self._missed()
            return
        core.v_raw, core.i_raw = pair = board.sample()
        v_raw, i_raw = pair
        core.v = v = core.v_sign * (v_raw - core.v_zero)
        core.i = i = core.i_sign * (i_raw - core.i_zero)
        stream, snapshot, rules = core.stream, core.snapshot, core.rules
        snapshot.ring.append(pair)
        if snapshot.collecting:
            snapshot.add(pair)
        if stream.open:
            codes = stream.codes
            if not codes:
                stream.begin_block()
            codes += pair
            if len(codes) >= stream.limit:
                stream.close_block()
        inputs = board.inputs()
        if inputs != core.seen:
            core.contacts.changed(inputs)
        if v_raw != rules.same_raw and rules.raw_low < v_raw < rules.raw_high:
            rules.same_raw = v_raw
            rules.good = index
        elif index - rules.good >= rules.miss:
            rules.stuck()
        if core.live:
            word = core.v_word
            if word != rules.last_word or rules.unsettled:
                rules.follow(word)
            if i > rules.i_screen or v > rules.v_screen or rules.back[0] - v > rules.drop or rules.busy:
                rules.judge()
        else:
            if i > rules.over_i or rules.busy:
                rules.watch_off()
            if core.state in PREPARING:
                core.arming.watch()
        rules.back.append(v)

    def _missed(self) -> None:
        """A conversion failed: its index is taken, the pair is absent, and nothing across it belongs together."""
        core = self.core
        self.miss -= 1
        core.missed += 1
        core.stream.close_block()
        core.snapshot.missed()
        core.contacts.read()

    def _catch_up(self) -> None:
        """The MCU stood still for a while: the conversions that fell into it are missed."""
        core, step = self.core, self.config.sample_ticks
        if self.halted:
            return
        lost = (core.now - self._next_sample) // step + 1
        self._next_sample += lost * step
        core.index += lost
        core.missed += lost
        core.stream.close_block()
        core.snapshot.missed()

    def _longest(self) -> None:
        self.core.trip(Cause.LONGEST_ON)

    def _late(self) -> None:
        self.core.cut(CutWhy.LOWER_MAX)
