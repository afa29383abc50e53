"""The clock of a hold: when it runs, what stops or restarts it, when readings are due.

The clock starts when the mean of the readback over the step's window enters the tolerance (IEC 60060-1 counts the
test's duration from there).  A continuous clock that leaves the tolerance, or that an arc interrupts, fails or begins
anew as the plan says; an accumulating one counts the blocks inside.
"""

from collections import deque
from collections.abc import Mapping

from hvhost.plan.program import HOLD_START, WINDOW_S, HoldClock, HoldStep, Step, WhenOut
from hvhost.supervisor.notes import Measured, Note, What

ACCUMULATE = HoldClock.ACCUMULATE  # a name of this module: it is read for every block
PEAK_BLOCKS = 6  # what stood before a collapse is the highest reading of so many blocks
ADD_ANEW = 1000  # blocks between two additions of the whole window


class Holding:
    """Window, clock and readings of the step being worked on; notes go to the list that is given."""

    def __init__(self, tick_hz: int, notes: list[Note]) -> None:
        self.elapsed_s = 0.0
        self.inside = False
        self.restarts = 0
        self._tick_hz, self._notes = tick_hz, notes
        # the window's blocks, each in what the mean sums up: sum() over numbers is ten times a generator's pace
        self._ticks: deque[int] = deque()
        self._peaks: deque[float] = deque(maxlen=PEAK_BLOCKS)
        self._pairs: deque[int] = deque()
        self._volts: deque[float] = deque()
        self._amps: deque[float] = deque()
        # what the window holds in all: at ten thousand pairs a second adding it up anew for each block is most of the
        # work; the totals are added anew now and then, so that rounding never gathers
        self._total_pairs, self._added = 0, 0
        self._total_volts = self._total_amps = 0.0
        self._spanned: Step | None = None  # the step whose window `_span` is, in ticks
        self._span = round(WINDOW_S * tick_hz)
        self._begun: int | None = None  # tick at which the clock started
        self._due: deque[float] = deque()

    def begin(self, step: Step) -> None:
        """A step begins; its clock, if it has one, stands."""
        self._begun = None
        self.elapsed_s, self.inside = 0.0, False
        self._due = deque(step.readings_s if isinstance(step, HoldStep) else ())

    def observe(self, measured: Measured, step: Step | None) -> None:
        """Take one block into the window, whatever the run does."""
        ticks, pairs = self._ticks, measured.pairs
        ticks.append(measured.tick)
        self._peaks.append(measured.volts_max)
        volts, amps = measured.volts * pairs, measured.amps * pairs
        self._pairs.append(pairs)
        self._volts.append(volts)
        self._amps.append(amps)
        self._total_pairs += pairs
        self._total_volts += volts
        self._total_amps += amps
        if step is not self._spanned:
            self._spanned = step
            self._span = round((step.window_s if isinstance(step, HoldStep) else WINDOW_S) * self._tick_hz)
        since = measured.tick + measured.ticks - self._span
        while len(ticks) > 1 and ticks[1] <= since:
            ticks.popleft()
            if len(self._peaks) > len(ticks):
                self._peaks.popleft()
            self._total_pairs -= self._pairs.popleft()
            self._total_volts -= self._volts.popleft()
            self._total_amps -= self._amps.popleft()
        self._added += 1
        if self._added >= ADD_ANEW:
            self._added = 0
            self._total_volts, self._total_amps = sum(self._volts), sum(self._amps)

    def take(self, step: HoldStep, measured: Measured, origins: Mapping[str, int]) -> tuple[bool, str]:
        """Judge one block of a hold; returns whether the hold is done, and why it failed ('' where it has not)."""
        pairs = self._total_pairs
        volts, amps = self._total_volts / pairs, self._total_amps / pairs
        now = measured.tick + measured.ticks
        inside = abs(volts - step.v) <= step.tolerance * abs(step.v)
        if inside and self._begun is None:
            self._begun = now
            self._notes.append(Note(what=What.CLOCK_STARTED, tick=now, index=measured.end_index, step=step,
                                    volts=volts, amps=amps))
        elif step.clock is ACCUMULATE:
            self.elapsed_s += measured.ticks / self._tick_hz if inside and self.inside else 0.0
        elif inside and self._begun is not None:
            self.elapsed_s = (now - self._begun) / self._tick_hz
        elif self._begun is not None:
            why = f"mean {volts:.6g} V outside {step.tolerance * 100:g} % of {step.v:g} V after {self.elapsed_s:.1f} s"
            failed = self._broken(step, why, now, measured.end_index)
            if failed:
                return False, failed
        self.inside = inside
        if self._due:
            self._take_readings(step, now, measured.end_index, (volts, amps), origins)
        return self.elapsed_s >= step.hold_s and not self._due, ""

    def interrupted(self, step: HoldStep, tick: int, index: int) -> str:
        """An arc stopped the output in the hold; returns why the hold failed, '' where it goes on after the pause."""
        self.inside = False
        if step.clock is HoldClock.ACCUMULATE or self._begun is None:
            return ""
        return self._broken(step, f"interrupted by an arc after {self.elapsed_s:.1f} s", tick, index)

    def next_reading_s(self, step: Step | None, tick: int, origins: Mapping[str, int]) -> float | None:
        """Seconds until the next reading is due, None when none is or its origin has not come yet."""
        if not self._due or not isinstance(step, HoldStep):
            return None
        origin = self._origin(step, origins)
        return None if origin is None else self._due[0] - (tick - origin) / self._tick_hz

    @property
    def peak_v(self) -> float:
        """The highest readback of the last blocks: what stood before a collapse."""
        return max(self._peaks, default=0.0)

    # ------------------------------------------------------------ inside

    def _origin(self, step: HoldStep, origins: Mapping[str, int]) -> int | None:
        return self._begun if step.origin == HOLD_START else origins.get(step.origin)

    def _broken(self, step: HoldStep, why: str, tick: int, index: int) -> str:
        """A continuous clock is broken: the text of the failure, or '' and the clock and its readings anew."""
        text = f"{step.place}: {step.name}: {why}"
        if step.when_out is WhenOut.FAIL:
            return text
        self._begun = None
        self.elapsed_s = 0.0
        self.restarts += 1
        self._due = deque(step.readings_s)
        self._notes.append(Note(what=What.CLOCK_RESTARTED, tick=tick, index=index, step=step, text=text))
        return ""

    def _take_readings(self, step: HoldStep, now: int, index: int, mean: tuple[float, float],
                       origins: Mapping[str, int]) -> None:
        origin = self._origin(step, origins)
        while self._due and origin is not None:
            if (now - origin) / self._tick_hz < self._due[0]:
                break
            self._notes.append(Note(what=What.READING, tick=now, index=index, step=step, volts=mean[0], amps=mean[1],
                                    reading_s=self._due.popleft()))
