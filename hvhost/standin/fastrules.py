"""The fast rules: judged at every sample from the warning to the cut, in integers, on oriented codes.

Oriented codes are positive in the direction of the output: ``sign(map) * (raw - zero)``.  A quiet sample passes a
screen of four comparisons (in `mcu`); only what fails it comes to `judge`.

*Explained fall*: max - min of the words over the last w samples and the programming delay before them, in monitor
codes ``>> 16``.  *Envelope*: monitor codes scaled by 65536; it follows the words up at once and decays by
``E -= E * K >> 32`` per sample, ``K = (sample_ticks << 32) // bleed_ticks``.  A rule acts when it holds for n
consecutive samples; when it held for fewer it is counted as interference.
"""

from collections import deque

from hvhost.standin.core import Core
from hvhost.wire.vocabulary import Cause, EventKind, Fitted, McuState

NOWHERE = 1 << 40  # a threshold that is never reached
TOLD_MS = 100  # interference is told at most this often per rule, and counted always
PRESENT = 20  # the readback must live while the voltage word is above 1/20 of its ceiling
K_MAX = (1 << 32) - 1


class FastRules:
    """Thresholds in force, what they are compared with, and the counters of persistence."""

    def __init__(self, core: Core) -> None:
        self.core = core
        self.back: deque[int] = deque([0], maxlen=1)  # oriented voltage codes of the last w samples
        self.words: deque[int] = deque([0], maxlen=1)  # voltage words of the last w + 1 + delay samples
        self._limits: deque[int] = deque([0], maxlen=2)  # envelope plus margin at the last w + 1 samples
        self.last_word = 0
        self.unsettled = True
        self.busy = False
        self.settling = False
        self.same_raw = NOWHERE
        self.good = 0
        self.fell_at = -NOWHERE
        self.envelope = self.stop_envelope = 0
        self._slow: int | None = None
        self._counts: dict[Cause, int] = {}
        self._interfered: dict[Cause, int] = {}
        self._told: dict[Cause, int] = {}
        self._level = self._i_limit = 0
        self._seen_off: set[Cause] = set()
        self.configure()

    # ---------------------------------------------------------------- settings

    def configure(self) -> None:
        """Take the settings in force: the EEPROM's, or made stricter for the arm under way."""
        core, settings, config = self.core, self.core.settings, self.core.config
        signed_v, signed_i = config.signs[0] == "s", config.signs[1] == "s"
        self.raw_low, self.raw_high = limits(config.v_bits, signed_v)
        self._i_low, self._i_high = limits(config.i_bits, signed_i)
        self._i_two_sided = signed_i
        if settings is None:
            self.drop = self.i_screen = self.v_screen = self.level = self.miss = NOWHERE
            self.over_i = self.over_v = self.margin = self.level_samples = NOWHERE
            self.gain, self.decay, self.persist, self.span, self.present_word = 0, K_MAX, 1, 1, NOWHERE
            return
        self.gain = abs(settings["vmap"])
        self.over_i, self.level, self.over_v = settings["oc"], settings["ocl"], settings["ov"]
        self.level_samples = config.samples(settings["oclms"])
        self.margin, self.drop = settings["env"], settings["drop"]
        self.persist = settings["persist"]
        # the fall stands for w samples only, so that a shorter span could never persist
        self.span = max(settings["span"], self.persist)
        self.decay = min(K_MAX, (config.sample_ticks << 32) // config.ticks(settings["bleed"]))
        self.miss = config.samples(settings["missms"])
        self.present_word = settings["vmax"] // PRESENT
        i_end = max(core.i_sign * (self._i_high - core.i_zero), core.i_sign * (self._i_low - core.i_zero))
        self.i_screen = min(self.over_i, self.level, i_end - 1)
        self.back = deque(self.back, maxlen=self.span)
        self.words = deque(self.words, maxlen=self.span + 1 + settings["delay"])
        self._limits = deque(self._limits, maxlen=self.span + 1)
        self.unsettled = True
        self._screen()

    def _screen(self) -> None:
        limit = (self.envelope >> 16) + self.margin
        self._limits.append(limit)
        self.v_screen = min(self.over_v, limit)

    def decayed(self, code: int, samples: int) -> int:
        """The bleed envelope's upper edge this many samples after a readback of ``code``."""
        scaled = max(0, code) << 16
        for _ in range(samples):
            scaled -= scaled * self.decay >> 32
        return (scaled >> 16) + self.margin

    # ---------------------------------------------------------------- beginnings and ends

    def begin(self) -> None:
        """The warning starts: nothing is remembered but the last readback."""
        self.envelope = 0
        self._counts.clear()
        self._level = self._i_limit = 0
        self._slow = None
        self.fell_at = -NOWHERE
        self.settling = False
        self._refill()

    def resumed(self) -> None:
        """Energised again after an arc pause; the envelope of before still decays."""
        self._counts.clear()
        self._refill()

    def _refill(self) -> None:
        core = self.core
        self.back.extend([core.v] * self.span)
        self.words.extend([0] * (self.words.maxlen or 1))
        self.last_word = core.v_word
        self.unsettled = True
        self.busy = False
        self.same_raw, self.good = NOWHERE, core.index
        self._screen()

    def stopped(self) -> None:
        """The MCU stopped the output: collapses are falls below the bleed envelope from the last sample before."""
        self.stop_envelope = max(0, self.core.v) << 16
        self.settling = self.stop_envelope >> 16 > self.drop
        self._counts.clear()
        self._level = 0
        self._seen_off.clear()
        self.busy = True

    # ---------------------------------------------------------------- each sample

    def follow(self, word: int) -> None:
        """Let the envelope and the history of words follow; called while words move or the envelope decays."""
        words = self.words
        words.append(word)
        self.last_word = word
        top = max(words) * self.gain
        envelope = self.envelope - (self.envelope * self.decay >> 32)
        self.envelope = envelope if envelope > top else top
        self._screen()
        self.unsettled = envelope > top or words[0] != word or self._limits[0] != self._limits[-1]
        if word <= self.present_word:
            self.good = self.core.index

    def judge(self) -> None:
        """Judge the sample that failed the screen, or that follows one that did; acts through `reaction` or `trip`."""
        core = self.core
        if core.state is McuState.PAUSING:
            core.reaction.watch()
            return
        v, i = core.v, core.i
        words = self.words
        explained = (max(words) - min(words)) * self.gain >> 16
        falls = self.back[0] - v > self.drop + explained
        if falls:
            self.fell_at = core.index
        fell = self.count(Cause.BREAKDOWN, falls)
        over = self.count(Cause.OVERCURRENT, i > self.over_i)
        fatal = self._voltage(v) | self._current(i)
        self.busy = bool(self._level or self._i_limit or any(self._counts.values()))
        if fatal:
            fatal |= (Cause.BREAKDOWN if fell else Cause(0)) | (Cause.OVERCURRENT if over else Cause(0))
            core.trip(fatal)
        elif fell or over:
            core.reaction.hit(fell, over, core.index)

    def _voltage(self, v: int) -> Cause:
        over = self.count(Cause.OVERVOLTAGE, v > self.over_v)
        above = self.count(Cause.ABOVE_ENVELOPE, self.above_envelope(v))
        return (Cause.OVERVOLTAGE if over else Cause(0)) | (Cause.ABOVE_ENVELOPE if above else Cause(0))

    def above_envelope(self, v: int) -> bool:
        """Whether the readback is above the envelope by more than failing to fall explains.

        A one-quadrant supply cannot pull a charged load down: a readback that comes to lie above the envelope since
        the envelope fell by more over w samples than the readback rose is *slow to fall*, told once; from then on it
        is above only where it rises by the margin above its lowest.
        """
        limit = (self.envelope >> 16) + self.margin
        if v <= limit:
            self._slow = None
            return False
        if self._slow is None:
            if v - self.back[0] >= self._limits[0] - limit:
                return True
            self._slow = v
            self.core.event(EventKind.SLOW_TO_FALL, v, self.core.index & 0x7FFFFFFF)
        self._slow = min(self._slow, v)
        return v > self._slow + self.margin

    def _current(self, i: int) -> Cause:
        core = self.core
        self._level = self._level + 1 if i > self.level else 0
        at_end = core.i_raw >= self._i_high or (self._i_two_sided and core.i_raw <= self._i_low)
        self._i_limit = self._i_limit + 1 if at_end else 0
        cause = Cause.OVERCURRENT_LEVEL if self._level >= self.level_samples else Cause(0)
        if self._i_limit >= self.miss and core.v_word > self.present_word:
            cause |= Cause.READBACK_MISSING
        return cause

    def count(self, cause: Cause, holds: bool) -> bool:
        """Count consecutive samples of one rule; True when it has held for n."""
        counted = self._counts.get(cause, 0)
        if holds:
            self._counts[cause] = counted + 1
            return counted + 1 >= self.persist
        if counted:
            self._counts[cause] = 0
            if counted < self.persist:
                self._interference(cause)
        return False

    def counting(self, cause: Cause) -> int:
        """For how many samples this rule has held now."""
        return self._counts.get(cause, 0)

    def restart(self, cause: Cause) -> None:
        """Begin to count anew after the rule has acted."""
        self._counts[cause] = 0

    def _interference(self, cause: Cause) -> None:
        core = self.core
        total = self._interfered[cause] = self._interfered.get(cause, 0) + 1
        if core.now - self._told.get(cause, -NOWHERE) >= core.config.ticks(TOLD_MS):
            self._told[cause] = core.now
            core.event(EventKind.INTERFERED, cause, total)

    def fall_after_stop(self, v: int) -> bool:
        """Whether the readback fell over w samples by more than D, to more than D below the bleed envelope.

        The envelope begins at the last sample before the stop.  A specimen that leaks lets the voltage sink below it
        slowly: that is a discharge, no collapse.
        """
        self.stop_envelope -= self.stop_envelope * self.decay >> 32
        return v < (self.stop_envelope >> 16) - self.drop and self.back[0] - v > self.drop

    def rebase(self) -> None:
        """A fall was acted on: the envelope after the stop begins at the present readback."""
        self.stop_envelope = max(0, self.core.v) << 16
        self._counts[Cause.BREAKDOWN] = 0

    # ---------------------------------------------------------------- readback missing; output off

    def stuck(self) -> None:
        """The voltage code stands still or at the converter's limit for too long."""
        core = self.core
        if core.live:
            if core.v_word > self.present_word:
                core.trip(Cause.READBACK_MISSING)
            else:
                self.good = core.index
        elif core.settings is not None and abs(core.v) > core.settings["zeroband"]:
            at_end = not self.raw_low < core.v_raw < self.raw_high
            if at_end and core.fitted & Fitted.MONITOR_POWERED:
                self._tell_off(Cause.READBACK_MISSING)

    def watch_off(self) -> None:
        """With the output off collapse and overcurrent are events: grounding after a run is no breakdown."""
        core = self.core
        if self.settling:
            if self.fall_after_stop(core.v):
                self._seen_off.discard(Cause.BREAKDOWN)
                self._tell_off(Cause.BREAKDOWN)
                self.rebase()
            self.settling = self.stop_envelope >> 16 > self.drop
        if core.i > self.over_i:
            if self.count(Cause.OVERCURRENT, True):
                self._tell_off(Cause.OVERCURRENT)
        else:
            self.restart(Cause.OVERCURRENT)
            self._seen_off.discard(Cause.OVERCURRENT)
        self.busy = self.settling or bool(self._counts.get(Cause.OVERCURRENT))

    def _tell_off(self, cause: Cause) -> None:
        if cause not in self._seen_off:
            self._seen_off.add(cause)
            self.core.event(EventKind.OFF_SEEN, cause, self.core.index & 0x7FFFFFFF)


def limits(bits: int, signed: bool) -> tuple[int, int]:
    """The lowest and highest code of a converter."""
    return (-(1 << (bits - 1)), (1 << (bits - 1)) - 1) if signed else (0, (1 << bits) - 1)
