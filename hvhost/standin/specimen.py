"""The specimen: leakage with absorption, capacitance, breakdown with statistical lag, arc, quench, re-strike.

Breakdown is drawn twice.  A Weibull distribution gives this specimen's strength Vs.  Then a hazard
h(V) = (V / Vs)^n / lag runs up, and the arc strikes when its integral passes an exponentially distributed amount: the
time lag is random, short well above Vs and long below it (inverse power law, the usual model of life under voltage).
"""

from collections.abc import Mapping
from math import exp, inf, log
from random import Random

from hvhost.standin.params import SpecimenParams

HAZARD_FLOOR = 0.5  # below this share of the strength the hazard is left out: with n = 60 it is under 1e-18
BURST_ARC_S = 0.3e-3  # longest arc of a burst
SHARE_MOST = 1.4  # above this share of the strength the arc strikes at once anyway


class Specimen:
    """Absorption branches, strength and arc of one specimen at a time; `renew` puts in the next."""

    __slots__ = ("_amount", "_branches", "_dt_s", "_factors", "_params", "_quench_amount", "_rng", "arc_energy_j",
                 "arcing", "arcs", "burning_s", "burst", "capacitance_f", "conductance_s", "connected", "forced",
                 "hazard_v", "off_s", "punctured", "strength_v", "struck_v", "u")

    def __init__(self, params: SpecimenParams, seed: int) -> None:
        self._params, self._rng = params, Random(f"specimen {seed}")
        self._branches = tuple((1.0 / ohm, ohm * farad) for ohm, farad in params.branches)
        self._dt_s = 0.0
        self._factors: tuple[float, ...] = ()
        self.connected = True
        self.renew()

    def renew(self) -> None:
        """A new specimen of the same make: its own strength, no charge absorbed."""
        self.u = [0.0] * len(self._branches)
        self.punctured = self.arcing = self.forced = False
        self.burning_s = self.struck_v = 0.0
        self.arcs = self.burst = 0
        self.arc_energy_j = 0.0
        self.off_s = inf  # since the last arc went out
        self._draw()
        self.settle({})

    def settle(self, faults: Mapping[str, float]) -> None:
        """Take the faults that are on: lead, leak, short."""
        p = self._params
        self.connected = "lead-off" not in faults
        ohm = p.punctured_ohm if self.punctured else p.insulation_ohm
        self.conductance_s = 1.0 / ohm
        self.conductance_s += sum(1.0 / max(faults[name], 1.0) for name in ("leak", "short") if name in faults)
        self.capacitance_f = p.capacitance_f
        if not self.connected:
            self.conductance_s = self.capacitance_f = 0.0
            self.hazard_v = inf
        else:
            self.hazard_v = self.strength_v * HAZARD_FLOOR

    def absorb(self, dt_s: float, v: float) -> None:
        """Let the absorption branches (R in series with C) charge towards ``v`` for ``dt_s``."""
        if dt_s != self._dt_s:
            self._dt_s = dt_s
            self._factors = tuple(1.0 - exp(-dt_s / tau_s) for _, tau_s in self._branches)
        if self.connected:
            u = self.u
            for at, factor in enumerate(self._factors):
                u[at] += (v - u[at]) * factor

    @property
    def branch_s(self) -> float:
        """Conductance of all branches together."""
        return sum(g for g, _ in self._branches) if self.connected else 0.0

    def source_a(self) -> float:
        """Current that the absorbed charge would drive back into a shorted output."""
        total = 0.0
        for (g, _), u in zip(self._branches, self.u, strict=True):
            total += g * u
        return total if self.connected else 0.0

    def strikes(self, dt_s: float, v: float) -> bool:
        """Let the hazard run for ``dt_s`` at ``v``; True when the arc strikes in it."""
        if v < self.hazard_v:
            return False
        p = self._params
        strength = self.strength_v
        if self.off_s < 20.0 * p.recovery_s:  # a gap comes back: strength times 1 - exp(-t / recovery)
            strength *= 1.0 - exp(-self.off_s / p.recovery_s) + 1e-6
        share = v / strength
        # capped well above any useful rate, so that a weak gap strikes at once instead of overflowing
        self._amount -= dt_s / p.lag_s * min(share, SHARE_MOST) ** p.lag_exponent
        return self._amount <= 0.0

    def strike(self, v: float, forced: bool = False) -> None:
        """The arc is there: the specimen's own charge goes into it at once.  A forced one is a flashover beside it."""
        self.arcing = True
        self.forced = forced or self.burst > 0
        self.burning_s = 0.0
        self.struck_v = v
        self.arcs += 1
        self.arc_energy_j = 0.5 * self.capacitance_f * v * v
        self._quench_amount = self._rng.expovariate(1.0)

    def burn(self, dt_s: float, arc_a: float) -> bool:
        """Let the arc burn with this current; True when it goes out (current under the holding current)."""
        p = self._params
        self.arc_energy_j += p.arc_v * arc_a * dt_s
        self.burning_s += dt_s
        if self.burst > 0 and self.burning_s >= BURST_ARC_S:
            return True
        if arc_a >= p.hold_a:
            return False
        self._quench_amount -= dt_s / p.quench_s
        return self._quench_amount <= 0.0

    def quench(self) -> None:
        """The arc is out: a gap recovers with a strength drawn anew, a solid stays punctured."""
        self.arcing = False
        self.off_s = 0.0
        self.burst = max(self.burst - 1, 0)
        if self.burst > 0:  # the next one strikes as soon as half of the voltage is back
            self.off_s, self.strength_v, self._amount = inf, self.struck_v * 0.5 / HAZARD_FLOOR, 0.0
            return
        self._draw()
        if not self._params.self_restoring and not self.forced:
            self.punctured = True
        if self.punctured:
            self.strength_v *= self._params.punctured_strength

    def _draw(self) -> None:
        p = self._params
        # Weibull: V = V0 + scale (-ln U)^(1 / shape)
        self.strength_v = p.strength_least_v + (p.strength_v - p.strength_least_v) * (
            -log(1.0 - self._rng.random())) ** (1.0 / p.strength_shape)
        self._amount = self._rng.expovariate(1.0)
