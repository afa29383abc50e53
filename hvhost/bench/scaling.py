"""Codes to volts or amps and back, with the uncertainty of it (JCGM 100).

The law of both directions is a straight line, ``value = gain * (code - zero)``.  What a later fit finds enters through
the same numbers (``Calibration``), so nothing above this file knows whether they came from the bench file or from
a calibration run.  Values are *oriented*: positive in the direction of the bench's polarity; the gain carries the
monitor's sign.  Integer rules work on codes *above zero*: ``sign * (code - round(zero))``.
"""

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from hvhost.words.errors import CommandRefused

SQRT12 = 12.0**0.5


@dataclass(frozen=True, slots=True, kw_only=True)
class Calibration:
    """A straight line found for one channel, with standard uncertainties (k = 1) and where it came from."""

    gain: float
    zero: float
    u_gain: float
    u_zero: float
    r: float = 0.0  # correlation of gain and zero in the fit
    source: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Scale:
    """One direction of one channel.

    ``gain`` in V or A per code (signed), ``zero`` in codes, ``u_gain`` relative and ``u_zero`` in V or A (both standard
    uncertainties, k = 1), ``code_low`` and ``code_high`` the converter's limits: a code at a limit says nothing.
    """

    gain: float
    zero: float
    u_gain: float
    u_zero: float
    code_low: int
    code_high: int
    r: float = 0.0  # correlation of the errors of gain and zero; a fit has one, a data sheet does not
    source: str = "bench file"

    @property
    def sign(self) -> int:
        """Sign of the gain: -1 where codes fall as the output rises."""
        return 1 if self.gain > 0 else -1

    @property
    def code_zero(self) -> int:
        """The whole code nearest to zero volts or amps."""
        return round(self.zero)

    @property
    def quantum(self) -> float:
        """Volts or amps per code, positive."""
        return abs(self.gain)

    def value(self, code: float) -> float:
        """Volts or amps at a raw code."""
        return self.gain * (code - self.zero)

    def values(self, codes: NDArray[np.generic]) -> NDArray[np.float64]:
        """The same for an array of raw codes."""
        return self.gain * (np.asarray(codes, dtype=np.float64) - self.zero)

    def code(self, value: float) -> int:
        """The raw code nearest to a value; raises CommandRefused where the converter cannot reach it."""
        nearest = round(value / self.gain + self.zero)
        # The range's end is one step above the top code of a converter with 2**n steps: that step is granted.
        if not self.code_low - 1 <= nearest <= self.code_high + 1:
            ends = sorted((self.value(self.code_low), self.value(self.code_high)))
            raise CommandRefused(f"a value between {ends[0]:.6g} and {ends[1]:.6g}", f"{value:.6g}")
        return min(max(nearest, self.code_low), self.code_high)

    def above_zero(self, code: int) -> int:
        """Oriented code above zero of a raw code."""
        return self.sign * (code - self.code_zero)

    def value_above(self, above: float) -> float:
        """Volts or amps at an oriented code above zero."""
        return self.quantum * above + self.gain * (self.code_zero - self.zero)

    def code_above(self, value: float) -> int:
        """The oriented code above zero nearest to a value (no limit applied)."""
        return round((value - self.gain * (self.code_zero - self.zero)) / self.quantum)

    def u(self, value: float) -> float:
        """Combined standard uncertainty of one reading: line and quantisation (JCGM 100 5.1.2, 5.2.2)."""
        # u² = u_line² + (q / √12)²
        return math.hypot(self.u_mean(value), self.quantum / SQRT12)

    def u_mean(self, value: float) -> float:
        """The same for a mean over many samples: gain and zero stay, quantisation averages out."""
        # u_line² = (u_gain · value)² + u_zero² + 2 r (u_gain · value) u_zero
        slope = self.u_gain * value
        return math.sqrt(max(0.0, slope * slope + self.u_zero * self.u_zero + 2.0 * self.r * slope * self.u_zero))

    def calibrated(self, calibration: Calibration) -> "Scale":
        """The same converter under another straight line."""
        return replace(self, gain=calibration.gain, zero=calibration.zero, u_gain=calibration.u_gain,
                       u_zero=calibration.u_zero, r=calibration.r, source=calibration.source)


@dataclass(frozen=True, slots=True, kw_only=True)
class Channel:
    """Voltage or current: the programming direction, the monitor, and whether the monitor's converter is signed."""

    program: Scale
    monitor: Scale
    signed: bool

    @property
    def monitor_per_word(self) -> float:
        """Monitor codes per programming code, signed."""
        return self.program.gain / self.monitor.gain

    def monitored(self, calibration: Calibration) -> "Channel":
        """The same channel under another straight line of its monitor."""
        return replace(self, monitor=self.monitor.calibrated(calibration))
