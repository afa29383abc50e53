"""Values with a standard uncertainty, and the few laws of propagation that the measures need (JCGM 100, 5.1.2).

Theory.  Every result is a mean of many codes turned to SI by one straight line.  Gain and zero are the same for all of
them, so their uncertainties do not shrink with the number of samples; noise does, but neighbouring samples are not
independent, so it is judged from the scatter of the means of stretches.  Quantisation is kept whole (one code over the
square root of twelve), since a quiet signal may sit inside one code.  U is 2 u throughout, about 95 %.
"""

from dataclasses import dataclass
from math import hypot, sqrt

import numpy as np

from hvhost.record.data import Floats
from hvhost.record.meta import RecordedScale

K = 2.0  # coverage factor of every U
STRETCHES = 16  # the scatter of a mean is judged from this many stretches
SQRT12 = sqrt(12.0)


@dataclass(frozen=True, slots=True)
class Value:
    """A value and its standard uncertainty (k = 1), same unit."""

    value: float
    u: float

    @property
    def expanded(self) -> float:
        """U, the expanded uncertainty (k = 2)."""
        return K * self.u

    @property
    def low(self) -> float:
        """Value less U."""
        return self.value - self.expanded

    @property
    def high(self) -> float:
        """Value plus U."""
        return self.value + self.expanded

    @property
    def relative(self) -> float:
        """U over the value's magnitude; infinite at zero."""
        return self.expanded / abs(self.value) if self.value else float("inf")


def scale_u(scale: RecordedScale, value: float) -> float:
    """Standard uncertainty of one value from gain, zero and quantisation."""
    # u² = (u_gain · value)² + u_zero² + (q / √12)²
    return sqrt((scale.u_gain * value) ** 2 + scale.u_zero**2 + (scale.gain / SQRT12) ** 2)


def scatter_of_mean(values: Floats) -> float:
    """Standard uncertainty of the mean of samples in order of time, from the means of stretches (JCGM 100, 4.2.3)."""
    if len(values) < 2:
        return 0.0
    parts = np.array([part.mean() for part in np.array_split(values, min(STRETCHES, len(values)))])
    return float(parts.std(ddof=1) / sqrt(len(parts)))


def mean_value(scale: RecordedScale, values: Floats) -> Value:
    """Mean of SI samples of one monitor with everything that makes it uncertain; needs at least one sample."""
    mean = float(values.mean())
    return Value(mean, hypot(scale_u(scale, mean), scatter_of_mean(values)))


def difference(a: Value, b: Value) -> Value:
    """A less B, independent of each other."""
    return Value(a.value - b.value, hypot(a.u, b.u))


def quotient(a: Value, b: Value) -> Value:
    """A over B, independent of each other; B must not be zero."""
    value = a.value / b.value
    # u²(a/b) = (u_a / b)² + (a u_b / b²)²
    return Value(value, hypot(a.u / b.value, value * b.u / b.value))
