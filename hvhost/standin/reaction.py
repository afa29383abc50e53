"""The arc reaction: latch, or a counted pause that the host may end after the rest and not before.

Only while energised, with a proven inhibit, no latch and a pause declared for this arm, a collapse, an absolute
overcurrent or a host's ``arc`` stops the output and leaves the relay closed.  An overcurrent is an arc if a collapse
lies within w samples of it, else it latches.  Everywhere else the same causes cut, relay included.
"""

from collections import deque
from dataclasses import dataclass

from hvhost.standin.core import Core, Timer
from hvhost.wire.frames import Segment
from hvhost.wire.vocabulary import Cause, CutWhy, Err, EventKind, Fitted, HostRule, McuState

EXPIRE_MS = 30_000  # a pause ends in the cut this long after its rest
SPANS = 8  # arcs that a late verdict of the host may still belong to
INDEX_BITS = 0x7FFFFFFF


@dataclass(slots=True)
class Span:
    """The samples that belong to one arc: w before its collapse to the end of its rest (``high`` None: open)."""

    number: int
    low: int
    high: int | None

    def holds(self, index: int) -> bool:
        """Whether the sample belongs to the arc."""
        return self.low <= index and (self.high is None or index <= self.high)


class Reaction:
    """The pause in force, the arcs of this arm, the rest under way."""

    def __init__(self, core: Core) -> None:
        self.core = core
        self.pause: tuple[int, int, int] | None = None  # count, rest in ticks, window in ticks
        self.number = 0
        self.rest_end = 0
        self._spans: deque[Span] = deque(maxlen=SPANS)
        self._times: list[int] = []
        self._total = 0
        self._began = 0
        self._restrikes = 0
        self._fell_at = 0  # sample of the last collapse in this pause
        self._confirm_by: int | None = None
        self._last_host: tuple[int, int] | None = None  # sample index, arc number answered

    # ---------------------------------------------------------------- the arm

    def refuse(self, pause: tuple[int, int, int]) -> bool:
        """Whether a pause lies outside the settings' bounds or the inhibit could not be proven."""
        core, settings = self.core, self.core.eeprom.settings
        count, rest_ms, window_ms = pause
        needed = Fitted.INHIBIT | Fitted.INHIBIT_BACK
        return (settings is None or core.fitted & needed != needed or count > settings["arccount"]
                or rest_ms < settings["arcrest"] or window_ms < settings["arcwindow"])

    def arm(self, pause: tuple[int, int, int] | None) -> None:
        """A new arm: its reaction, no arcs yet."""
        ticks = self.core.config.ticks
        self.pause = (pause[0], ticks(pause[1]), ticks(pause[2])) if pause else None
        self.number = self._total = 0
        self._times.clear()
        self._spans.clear()
        self._last_host = self._confirm_by = None

    def disarm(self) -> None:
        """The arm is void: back to latching."""
        self.pause = None

    def ended(self) -> None:
        """A cut: whatever the host still says of the last arc belongs to it."""
        self._confirm_by = None
        if self._spans:
            self._spans[-1].high = None

    # ---------------------------------------------------------------- arcs

    def hit(self, fell: bool, over: bool, index: int) -> None:
        """The MCU saw a collapse, an absolute overcurrent, or both, at this sample."""
        core = self.core
        if self._may_pause():
            recent = core.index - core.rules.fell_at <= core.rules.span
            self._stop(index, confirmed=fell or recent)
            return
        if fell:
            self._number(index)
        cause = (Cause.BREAKDOWN if fell else Cause(0)) | (Cause.OVERCURRENT if over else Cause(0))
        core.trip(cause, CutWhy.ARC if fell else CutWhy.RULE)

    def _may_pause(self) -> bool:
        core = self.core
        return (self.pause is not None and core.state is McuState.ENERGISED and not core.latched
                and bool(core.proven & Fitted.INHIBIT))

    def _number(self, index: int) -> None:
        self.number += 1
        self._spans.append(Span(self.number, index - self.core.rules.span, None))

    def _stop(self, index: int, *, confirmed: bool) -> None:
        core = self.core
        if self.pause is None:
            raise AssertionError("an arc pause without a pause declared")
        core.stop_output(relay=True)
        core.enter(McuState.PAUSING)
        self._number(index)
        self._began, self._restrikes, self._fell_at = core.now, 0, core.index
        self.rest_end = core.now + self.pause[1]
        self._spans[-1].high = core.index - (-self.pause[1] // core.config.sample_ticks)
        core.set_timer(Timer.PAUSE, self.rest_end + core.config.ticks(EXPIRE_MS))
        core.event(EventKind.PAUSING, self.number, index & INDEX_BITS)
        core.snapshot.trigger("arc")
        self._confirm_by = None if confirmed else core.index + core.rules.span
        if confirmed:
            self._confirm()

    def _confirm(self) -> None:
        """It is an arc: count it; one too many in a window or in all latches."""
        core, settings = self.core, self.core.eeprom.settings
        self._confirm_by = None
        if self.pause is None or settings is None:
            raise AssertionError("an arc counted without a pause declared")
        count, _, window = self.pause
        self._total += 1
        self._times = [t for t in self._times if core.now - t < window] + [core.now]
        if len(self._times) > count or self._total > settings["arctotal"]:
            core.trip(Cause.ARC_COUNT, CutWhy.ARC)

    def watch(self) -> None:
        """Judge one sample while pausing."""
        core, rules = self.core, self.core.rules
        v = core.v
        fell = rules.count(Cause.BREAKDOWN, rules.fall_after_stop(v))
        over = rules.count(Cause.OVERCURRENT, core.i > rules.over_i)
        above = rules.count(Cause.ABOVE_ENVELOPE, v > (rules.envelope >> 16) + rules.margin)
        young = core.now - self._began <= self._restrike_ticks()
        if above:
            core.trip(Cause.ARC_IN_REST, CutWhy.ARC)
        elif fell:
            self._fell(young)
        elif self._confirm_by is None:
            if over and not young:
                core.trip(Cause.OVERCURRENT)
        elif core.index > self._confirm_by and not rules.counting(Cause.BREAKDOWN):
            core.trip(Cause.OVERCURRENT)  # no collapse near it: not an arc

    def _fell(self, young: bool) -> None:
        core = self.core
        core.rules.rebase()
        goes_on = core.index - self._fell_at <= core.rules.span + core.rules.persist
        self._fell_at = core.index
        if self._confirm_by is not None:
            self._confirm()
        elif goes_on:
            return  # the same collapse, still falling
        elif young:
            self._restrikes += 1
            core.event(EventKind.RESTRIKE, self.number, self._restrikes)
        else:
            core.trip(Cause.ARC_IN_REST, CutWhy.ARC)

    def _restrike_ticks(self) -> int:
        settings = self.core.eeprom.settings
        return self.core.config.ticks(settings["restrike"]) if settings else 0

    # ---------------------------------------------------------------- the host's verdict

    def host(self, low_index: int) -> int:
        """A host judged a breakdown at this sample: merge it or act; return the arc's number, 0 for a cut."""
        core = self.core
        index = min(core.unwrap(low_index), core.index)
        if self._last_host and self._last_host[0] == index:
            return self._last_host[1]
        number = next((span.number for span in self._spans if span.holds(index)), 0)
        if number:
            core.event(EventKind.MERGED, number, index & INDEX_BITS)
            if self._confirm_by is not None and number == self.number:
                self._confirm()
        elif self._may_pause():
            self._stop(index, confirmed=True)
            number = self.number
        elif self._earlier(index):
            self._number(index)
            self._spans[-1].high = index
            number = self.number
            self._confirm()
        else:
            late = core.state is McuState.PAUSING
            if core.live:
                self._number(index)
            core.cut(CutWhy.ARC, cause=Cause.ARC_IN_REST if late else Cause.HOST_RULE,
                     detail=index if late else HostRule.BREAKDOWN)
        self._last_host = (index, number)
        return number

    def _earlier(self, index: int) -> bool:
        """Whether, while pausing, the host tells of an arc before the one of this pause."""
        return self.core.state is McuState.PAUSING and bool(self._spans) and index < self._spans[-1].low

    # ---------------------------------------------------------------- the end of a pause

    def check(self, segment: Segment) -> Err | None:
        """Why this segment's arc number does not fit, or None; while pausing it must be the pause's, after the rest."""
        core = self.core
        if core.state is McuState.PAUSING:
            if segment.arc is None or segment.arc != self.number:
                return Err.ARC
            if core.now < self.rest_end or self._confirm_by is not None:
                return Err.REST
            return None
        return Err.ARC if segment.arc is not None and segment.arc != self.number else None

    def resume(self) -> None:
        """Release clear and inhibit from zero: energised again, under the same arm."""
        core = self.core
        core.stop_timer(Timer.PAUSE)
        core.drive(inhibit=True, clear=False, relay=core.relay)
        core.drive(inhibit=False, clear=False, relay=core.relay)
        core.rules.resumed()
        core.enter(McuState.ENERGISED)
        core.event(EventKind.RESUMED, self.number)

    def expired(self) -> None:
        """Nobody resumed: cut and latch."""
        self.core.trip(Cause.PAUSE_EXPIRED, CutWhy.EXPIRED)
