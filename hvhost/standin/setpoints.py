"""Set-points: the queue of segments and the words that they make at every tick.

The arithmetic is `wire.interpolate`'s; a lower ends in the cut at the tick at which its voltage word is zero.
"""

from collections import deque

from hvhost.standin.core import Core, Timer
from hvhost.wire.frames import Segment
from hvhost.wire.interpolate import Ramp, lower_ticks, lowered_word, within_slew
from hvhost.wire.vocabulary import CutWhy, Err, EventKind, McuState


class Setpoints:
    """The segment under way, those that wait, and where they will end."""

    def __init__(self, core: Core) -> None:
        self.core = core
        self.serial = 0
        self.queue: deque[tuple[int, int, int, int]] = deque()
        self.empty()

    def empty(self) -> None:
        """Drop the segment under way and all that wait; the words stand."""
        self.queue.clear()
        self.moving = False
        self.core.stop_timer(Timer.SEGMENT)

    @property
    def end(self) -> tuple[int, int]:
        """The words at which everything accepted so far will end."""
        if self.queue:
            return self.queue[-1][1:3]
        if self.moving:
            return self._ramp.v1, self._ramp.i1
        return self.core.v_word, self.core.i_word

    def check(self, segment: Segment) -> Err | None:
        """Why this segment cannot follow what is queued, or None."""
        core, settings = self.core, self.core.settings
        if settings is None:
            return Err.BLANK
        if len(self.queue) >= core.config.queue:
            return Err.QUEUE
        if segment.v > settings["vmax"] or segment.i > settings["imax"]:
            return Err.CEILING
        if segment.ticks == 0:
            return Err.RANGE
        v, i = self.end
        hz = core.config.tick_hz
        if not (within_slew(v, segment.v, segment.ticks, hz, settings["vslew"])
                and within_slew(i, segment.i, segment.ticks, hz, settings["islew"])):
            return Err.SLEW
        return None

    def add(self, segment: Segment) -> int:
        """Queue a checked segment, start it where nothing is under way; return its serial number."""
        self.serial += 1
        self.queue.append((self.serial, segment.v, segment.i, segment.ticks))
        if self.core.state is McuState.ENERGISED and not self.moving:
            self.start()
        return self.serial

    def start(self) -> None:
        """Begin the next segment at this tick, or hold."""
        core = self.core
        if not self.queue:
            return
        serial, v, i, ticks = self.queue.popleft()
        self._begin(Ramp(core.v_word, core.i_word, v, i, ticks))
        core.event(EventKind.SEGMENT, serial, len(self.queue))
        self._running = serial

    def ramp_down(self) -> None:
        """Ramp the voltage word to zero at the settings' down-slew; the current word stands."""
        core = self.core
        settings = core.eeprom.settings
        if settings is None:
            raise AssertionError("energised without settings")
        self.move()
        self.empty()
        self._slew = settings["downslew"]
        if core.v_word:
            ticks = lower_ticks(core.v_word, self._slew, core.config.tick_hz)
            self._begin(Ramp(core.v_word, core.i_word, 0, core.i_word, ticks))
            core.set_timer(Timer.LOWER, core.now + core.config.ticks(settings["lowermax"]))

    def _begin(self, ramp: Ramp) -> None:
        self._ramp, self._begun = ramp, self.core.now
        self.moving = True
        self.core.set_timer(Timer.SEGMENT, self.core.now + ramp.ticks)

    def move(self) -> None:
        """Bring the words to this tick."""
        core = self.core
        if not self.moving:
            return
        k = core.now - self._begun
        if core.state is McuState.LOWERING:
            core.apply_words(lowered_word(self._ramp.v0, self._slew, core.config.tick_hz, k), core.i_word)
        else:
            core.apply_words(*self._ramp.at(k))

    def ended(self) -> None:
        """The segment under way is over: the next one begins, the words stand, or a lower ends in the cut."""
        core = self.core
        core.stop_timer(Timer.SEGMENT)
        self.move()
        self.moving = False
        if core.state is McuState.LOWERING:
            core.cut(CutWhy.LOWERED)
        elif self.queue:
            self.start()
        else:
            core.event(EventKind.HOLD, self._running)
