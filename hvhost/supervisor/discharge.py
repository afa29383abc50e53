"""What may be said about the voltage after a cut (S6).

'Below threshold' is claimed only for a reading whose 95 % upper bound is below the touch threshold *after a fall that
was seen* and that fits the bleed time.  Everything else is named for what it is: still falling, lost at once, not
measured here, or the position of a grounding contact, which is no proof either.

Why a low reading alone is nothing.  A divider with an open arm, a lead that fell off and a dead front end all read
zero.  Only a monitor that showed a voltage well above the threshold and then came down no faster than the bench can
discharge has shown that it still measures.  So an idle bench after a restart says 'unknown' however low it reads, and
so does one whose reading jumped: a breakdown does that as well as a broken lead, and after it the specimen's
dielectric can bring charge back.  What remains then is to count bleed times.
"""

import math
from dataclasses import dataclass

from hvhost.supervisor.states import Voltage

PRESENT = Voltage.PRESENT  # a name of this module: it is looked at for every block
K_95 = 1.96  # two-sided 95 % of a normal distribution: the bound is generous for a one-sided claim
FASTEST = 8.0  # a load may discharge this many times faster than the bleed alone; anything faster is no fall
RISE_BANDS = 2.0  # a later rise by this many 95 % bands restarts the clock (dielectric absorption)
SEEN_TIMES = 2.0  # the fall must have begun this many thresholds up, or it has shown nothing


@dataclass(frozen=True, slots=True, kw_only=True)
class Chain:
    """What the bench's voltage monitor can prove: see `Bench`; ``u_zero_v`` is the standard uncertainty at zero."""

    touch_v: float
    bleed_s: float
    bleeds: int
    slew_v_per_s: float  # the steepest that the words may fall while energised or lowering
    u_zero_v: float
    measured_here: bool  # powered after the cut and at the specimen


class Discharge:
    """Follows the readback and names the voltage; fed with each block's mean, in tick time."""

    def __init__(self, chain: Chain) -> None:
        self.chain = chain
        self._jump_v = max(RISE_BANDS * self.band_v, 0.5 * chain.touch_v)  # below the floor by this is no noise
        self.state = Voltage.UNKNOWN
        self.text = ""
        self.lost = False  # the reading jumped, and has shown no voltage since
        self.cut_s: float | None = None  # tick time of the last cut that was told; None while energised
        self._last_s: float | None = None
        self._top = -math.inf  # highest reading of the stretch without a jump
        self._floor = -math.inf  # below this no discharge can have led
        self._reached = self._rose = False  # the bound was below; and went up again since
        self._lowest = math.inf  # since the bound went below
        self._quiet_s = -math.inf  # no claim before this

    @property
    def band_v(self) -> float:
        """95 % band of the chain's zero, V."""
        return K_95 * self.chain.u_zero_v

    @property
    def provable(self) -> bool:
        """Whether this chain can ever show that the voltage is below the threshold."""
        return self.chain.measured_here and self.band_v < self.chain.touch_v

    @property
    def seen_v(self) -> float:
        """From where a fall must have been seen, V."""
        return max(SEEN_TIMES * self.chain.touch_v, self.chain.touch_v + RISE_BANDS * self.band_v)

    def bleeds_passed(self, t_s: float) -> float | None:
        """Bleed times since the last cut; None while energised and where no cut was told in this session."""
        return None if self.cut_s is None else max(0.0, t_s - self.cut_s) / self.chain.bleed_s

    def cut(self, t_s: float) -> None:
        """The output was cut at this tick time."""
        self.cut_s = t_s

    def unknown(self, text: str) -> None:
        """Nothing may be said (link lost, reading old); what is seen later begins anew."""
        self.state, self.text = Voltage.UNKNOWN, text
        self.lost, self._last_s, self.cut_s = False, None, None
        self._forget_reached()

    def take(self, t_s: float, volts: float, u_volts: float, *, live: bool, grounded: bool) -> Voltage:
        """Judge one block: mean volts with its standard uncertainty; ``live`` while anything is energised."""
        upper = volts + K_95 * u_volts
        self._watch_fall(t_s, volts, live, grounded)
        if live:
            self.cut_s = None
            if self.state is not PRESENT:
                self._forget_reached()
                self._say(Voltage.PRESENT, "output energised")
            return PRESENT
        if grounded:
            self._grounded(upper)
        elif not self.provable:
            self._say(Voltage.UNKNOWN, "not measured here")
        else:
            self._judge(t_s, volts, upper)
        return self.state

    def _watch_fall(self, t_s: float, volts: float, live: bool, grounded: bool) -> None:
        """Follow the steepest fall that a discharge can take; a reading below it has jumped."""
        if self._last_s is None or grounded:
            self._top = self._floor = volts
            self.lost = False
        elif volts >= self._floor and not self.lost:  # nothing fell
            self._top, self._floor = max(self._top, volts), volts
        else:
            span_s = max(t_s - self._last_s, 0.0)
            # v(t) = v0 exp(-t / tau) with tau the bleed time over FASTEST, and what the words took while they were out
            floor = max(self._floor, 0.0) * math.exp(-FASTEST * span_s / self.chain.bleed_s)
            if live:
                floor -= self.chain.slew_v_per_s * span_s
            if volts < floor - self._jump_v:
                self.lost, self._top, self._floor = True, volts, volts
            else:
                self._top, self._floor = max(self._top, volts), max(floor, volts)
            if self.lost and self._top >= self.seen_v:
                self.lost = False
        self._last_s = t_s

    def _grounded(self, upper: float) -> None:
        if self.provable and upper >= self.chain.touch_v:
            self._say(Voltage.FALLING, f"grounding device's contact says closed, the reading says up to {upper:.0f} V")
        else:
            self._say(Voltage.GROUNDED, "grounding device's contact says closed: a position, not a proof")

    def _judge(self, t_s: float, volts: float, upper: float) -> None:
        if upper >= self.chain.touch_v:  # told even where the measurement is in doubt: it errs on the safe side
            self._rose = self._rose or self._reached
            self._reached, self._lowest = False, math.inf
            self._say(Voltage.FALLING, f"falling: upper bound {upper:.0f} V, threshold {self.chain.touch_v:.0f} V")
        elif self.lost:
            self._say(Voltage.UNKNOWN, "measurement lost: the reading fell faster than any discharge through the bleed")
        elif self._top < self.seen_v:
            self._say(Voltage.UNKNOWN, "no fall was seen: a low reading alone proves nothing")
        else:
            self._below(t_s, volts, upper)

    def _below(self, t_s: float, volts: float, upper: float) -> None:
        """The bound is below after a fall that was seen; a rise since then is waited out for one bleed time."""
        if self._rose or volts > self._lowest + RISE_BANDS * self.band_v:
            self._rose, self._lowest, self._quiet_s = False, volts, t_s + self.chain.bleed_s
        self._lowest = min(self._lowest, volts)
        self._reached = True
        if t_s < self._quiet_s:
            self._say(Voltage.FALLING, "the voltage rose again (dielectric absorption): waiting anew")
        else:
            self._say(Voltage.BELOW, f"upper bound {max(upper, 0.0):.0f} V is below {self.chain.touch_v:.0f} V")

    def _forget_reached(self) -> None:
        self._reached = self._rose = False
        self._lowest, self._quiet_s = math.inf, -math.inf

    def _say(self, state: Voltage, text: str) -> None:
        self.state, self.text = state, text
