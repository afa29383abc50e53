"""The measuring chain: divider and shunt, clamp, RC low-pass, converter with offset, noise and quantisation.

Signals at the converters' pins are volts.  A code is round(signal * codes_per_v + offset_code + noise), kept within
the converter's limits.  Noise comes from two rings of Gaussian numbers drawn once from the seed; their lengths have no
common factor, so pairs repeat only after hours.
"""

from collections.abc import Mapping
from math import exp, hypot, pi, sin
from random import Random

from hvhost.standin.params import PlantParams

RING_V, RING_I = 4093, 4091  # primes
FAR_OFF = 1e9  # code of a pin torn to its rail, before the converter's limit


class Chain:
    """Filters and converters of both monitors."""

    __slots__ = ("_at_i", "_at_v", "_codes", "_drift_from_s", "_dt_s", "_i_codes", "_i_ring", "_i_zero", "_k_i", "_k_v",
                 "_limits", "_odd", "_params", "_ring_scale", "_ripple", "_v_alive_after_cut", "_v_codes", "_v_ring",
                 "_v_zero", "clamp_a", "i_a", "v_v")

    def __init__(self, params: PlantParams, seed: int) -> None:
        self._params = params
        chain = params.chain
        draw = Random(f"noise {seed}").gauss
        self._v_ring = tuple(draw(0.0, chain.v_adc.noise_lsb) for _ in range(RING_V))
        self._i_ring = tuple(draw(0.0, chain.i_adc.noise_lsb) for _ in range(RING_I))
        self._at_v = self._at_i = 0
        self.v_v = self.i_a = 0.0  # filtered, referred to the output: volts and amps
        self._dt_s = self._k_v = self._k_i = 0.0
        self._codes = (0, 0)
        self._drift_from_s = 0.0
        self._odd: dict[str, float] = {}
        self._limits = (chain.v_adc.low, chain.v_adc.high, chain.i_adc.low, chain.i_adc.high)
        self._v_alive_after_cut = chain.powered_after_cut
        self.clamp_a = chain.clamp_v / (chain.shunt_ohm * chain.shunt_gain)
        omega = 2.0 * pi * params.supply.ripple_hz
        self._ripple = (omega, 1.0 / hypot(1.0, omega * chain.tau_s))  # RC low-pass at the ripple frequency
        self.settle({})

    def settle(self, faults: Mapping[str, float], t_s: float = 0.0) -> None:
        """Take the faults that are on from ``t_s`` on; those that only scale or shift cost nothing per sample."""
        chain = self._params.chain
        v_sign = -chain.v_sign if "v-reversed" in faults else chain.v_sign
        i_sign = -chain.i_sign if "i-reversed" in faults else chain.i_sign
        if "polarity-wrong" in faults:
            v_sign, i_sign = -v_sign, -i_sign
        rails = 0.8 if "auxiliary-low" in faults else 1.0
        v_gain = 0.0 if "divider-open" in faults else rails * (1.0 + chain.v_gain_error + faults.get("v-gain", 0.0))
        i_gain = 0.0 if "shunt-short" in faults else rails * (1.0 + chain.i_gain_error)
        # codes per volt at the output: sign * buffer / ratio * codes per volt at the pin
        self._v_codes = v_sign * v_gain * chain.buffer_gain / chain.ratio * chain.v_adc.codes_per_v
        self._i_codes = i_sign * i_gain * chain.shunt_ohm * chain.shunt_gain * chain.i_adc.codes_per_v
        v_shift, i_shift = faults.get("v-offset", 0.0), faults.get("i-offset", 0.0)
        self._v_zero = chain.v_adc.offset_code + chain.v_offset_v * chain.v_adc.codes_per_v + v_shift
        self._i_zero = chain.i_adc.offset_code + chain.i_offset_v * chain.i_adc.codes_per_v + i_shift
        self._ring_scale = faults.get("noise", 1.0)
        odd = ("v-stuck", "i-stuck", "v-saturated", "i-saturated", "swapped", "divider-low-open", "shunt-open",
               "v-spike", "i-spike", "v-dip", "v-drift")
        if "v-drift" in faults and "v-drift" not in self._odd:
            self._drift_from_s = t_s
        self._odd = {name: faults[name] for name in odd if name in faults}

    def step(self, dt_s: float, v0: float, v1: float, i_a: float) -> None:
        """Let ``dt_s`` pass while the output went straight from ``v0`` to ``v1`` and ``i_a`` flowed in the return."""
        if dt_s != self._dt_s:
            self._dt_s = dt_s
            self._k_v = exp(-dt_s / self._params.chain.tau_s)
            self._k_i = 1.0 - exp(-dt_s / self._params.chain.shunt_tau_s)
        # response of an RC low-pass to a ramp: y = v1 - s tau + (y0 - v0 + s tau) exp(-dt / tau)
        lag = (v1 - v0) / dt_s * self._params.chain.tau_s
        self.v_v = v1 - lag + (self.v_v - v0 + lag) * self._k_v
        if i_a > self.clamp_a:
            i_a = self.clamp_a
        elif i_a < -self.clamp_a:
            i_a = -self.clamp_a
        self.i_a += (i_a - self.i_a) * self._k_i

    def convert(self, t_s: float, ripple_v: float, powered: bool) -> tuple[int, int]:
        """Return the codes of both converters now; ``ripple_v`` is the ripple's amplitude at the output."""
        v, i = self.v_v, self.i_a
        if ripple_v:
            omega, passed = self._ripple
            v += ripple_v * passed * sin(omega * t_s)
        if not powered and not self._v_alive_after_cut:
            v = 0.0
        at_v, at_i = self._at_v, self._at_i
        self._at_v = at_v + 1 if at_v + 1 < RING_V else 0
        self._at_i = at_i + 1 if at_i + 1 < RING_I else 0
        scale = self._ring_scale
        v_code = v * self._v_codes + self._v_zero + self._v_ring[at_v] * scale
        i_code = i * self._i_codes + self._i_zero + self._i_ring[at_i] * scale
        if self._odd:
            v_code, i_code = self._distort(t_s, v_code, i_code)
        v_low, v_high, i_low, i_high = self._limits
        v_whole, i_whole = round(v_code), round(i_code)
        codes = (v_low if v_whole < v_low else v_high if v_whole > v_high else v_whole,
                 i_low if i_whole < i_low else i_high if i_whole > i_high else i_whole)
        self._codes = codes
        return codes

    def _distort(self, t_s: float, v_code: float, i_code: float) -> tuple[float, float]:
        odd, chain = self._odd, self._params.chain
        if "divider-low-open" in odd and abs(self.v_v) > chain.clamp_v:
            v_code = FAR_OFF * chain.v_sign
        if "shunt-open" in odd and abs(self.i_a) > 1e-9:
            i_code = FAR_OFF * chain.i_sign
        v_code += odd.get("v-drift", 0.0) * (t_s - self._drift_from_s)
        v_code += (odd.get("v-spike", 0.0) - odd.get("v-dip", 0.0)) * chain.v_sign
        i_code += odd.get("i-spike", 0.0) * chain.i_sign
        if "swapped" in odd:
            v_code, i_code = i_code, v_code
        if "v-saturated" in odd:
            v_code = FAR_OFF * odd["v-saturated"]
        if "i-saturated" in odd:
            i_code = FAR_OFF * odd["i-saturated"]
        return (self._codes[0] if "v-stuck" in odd else v_code, self._codes[1] if "i-stuck" in odd else i_code)


