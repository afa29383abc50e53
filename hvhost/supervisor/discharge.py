"""What may be said about the voltage after a cut (S6).

'Below threshold' is claimed only for a reading whose 95 % upper bound is below the touch threshold after a fall that
fits the bleed time.  Everything else is named for what it is: still falling, lost at once, not measured here, or the
position of a grounding contact, which is no proof either.
"""

import math
from dataclasses import dataclass

from hvhost.supervisor.states import Voltage

K_95 = 1.96  # two-sided 95 % of a normal distribution: the bound is generous for a one-sided claim
FASTEST = 8.0  # a load may discharge this many times faster than the bleed alone; anything faster is no fall
RISE_BANDS = 2.0  # a later rise by this many 95 % bands restarts the clock (dielectric absorption)


@dataclass(frozen=True, slots=True, kw_only=True)
class Chain:
    """What the bench's voltage monitor can prove: see `Bench`; ``u_zero_v`` is the standard uncertainty at zero."""

    touch_v: float
    bleed_s: float
    bleeds: int
    down_slew_v_per_s: float
    u_zero_v: float
    measured_here: bool  # powered after the cut and at the specimen


class Discharge:
    """Follows the readback and names the voltage; fed with each block's mean, in tick time."""

    def __init__(self, chain: Chain) -> None:
        self.chain = chain
        self.state = Voltage.UNKNOWN
        self.text = ""
        self.lost = False
        self.cut_s: float | None = None  # tick time of the last cut
        self._last: tuple[float, float] | None = None  # (t_s, volts)
        self._lowest = math.inf
        self._reached_s: float | None = None

    @property
    def band_v(self) -> float:
        """95 % band of the chain's zero, V."""
        return K_95 * self.chain.u_zero_v

    @property
    def provable(self) -> bool:
        """Whether this chain can ever show that the voltage is below the threshold."""
        return self.chain.measured_here and self.band_v < self.chain.touch_v

    def bleeds_passed(self, t_s: float) -> float | None:
        """Bleed times since the last cut, None before the first."""
        return None if self.cut_s is None else max(0.0, t_s - self.cut_s) / self.chain.bleed_s

    def cut(self, t_s: float) -> None:
        """The output was cut at this tick time."""
        self.cut_s = t_s

    def unknown(self, text: str) -> None:
        """Nothing may be said (link lost, reading old)."""
        self.state, self.text = Voltage.UNKNOWN, text
        self._last = None

    def take(self, t_s: float, volts: float, u_volts: float, *, live: bool, grounded: bool) -> Voltage:
        """Judge one block: mean volts with its standard uncertainty; ``live`` while anything is energised."""
        upper = volts + K_95 * u_volts
        self._watch_fall(t_s, volts, live)
        if live:
            self.lost = False
            self._lowest, self._reached_s = math.inf, None
            self._say(Voltage.PRESENT, "output energised")
        elif grounded:
            self._say(Voltage.GROUNDED, "grounding device's contact says closed: a position, not a proof")
        elif not self.provable:
            self._say(Voltage.UNKNOWN, "not measured here")
        elif self.lost:
            self._say(Voltage.UNKNOWN, "measurement lost: the reading fell faster than any discharge through the bleed")
        else:
            self._judge(t_s, volts, upper)
        self._last = (t_s, volts)
        return self.state

    def _watch_fall(self, t_s: float, volts: float, live: bool) -> None:
        """Mark the measurement lost when the reading falls faster than a discharge can."""
        if self._last is None:
            return
        before_s, before = self._last
        span_s = max(t_s - before_s, 1e-6)
        if before - volts <= max(self.chain.touch_v, 3 * self.band_v):
            return
        explained = before * math.exp(-FASTEST * span_s / self.chain.bleed_s)
        if live:
            explained -= self.chain.down_slew_v_per_s * span_s
        if volts < explained - self.band_v:
            self.lost = True

    def _judge(self, t_s: float, volts: float, upper: float) -> None:
        if upper >= self.chain.touch_v:
            self._lowest, self._reached_s = min(self._lowest, volts), None
            self._say(Voltage.FALLING, f"falling: upper bound {upper:.0f} V, threshold {self.chain.touch_v:.0f} V")
        elif volts > self._lowest + RISE_BANDS * self.band_v:
            self._lowest, self._reached_s = volts, t_s
            self._say(Voltage.FALLING, "the voltage rose again (dielectric absorption): waiting anew")
        else:
            self._lowest = min(self._lowest, volts)
            self._reached_s = t_s if self._reached_s is None else self._reached_s
            self._say(Voltage.BELOW, f"upper bound {max(upper, 0.0):.0f} V is below {self.chain.touch_v:.0f} V")

    def _say(self, state: Voltage, text: str) -> None:
        self.state, self.text = state, text
