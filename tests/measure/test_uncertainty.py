"""Propagation of uncertainty, against hand calculation and published examples."""

import numpy as np
import pytest

from hvhost.measure.connected import line_fit
from hvhost.measure.uncertainty import Value, difference, mean_value, quotient, scale_u, scatter_of_mean
from hvhost.record.meta import RecordedScale

SCALE = RecordedScale(gain=20_000.0 / 65_536, zero=0.0, u_gain=0.0, u_zero=0.0, code_low=0, code_high=65_535)


def test_quantisation_alone_is_one_code_over_the_root_of_twelve() -> None:
    """Outside check: 16 bits over 20 kV are 0.30517578125 V a code; over the root of twelve 0.088097 V (arithmetic)."""
    assert scale_u(SCALE, 0.0) == pytest.approx(0.30517578125 / 12**0.5, rel=1e-12)
    assert scale_u(SCALE, 0.0) == pytest.approx(0.0880967, abs=1e-6)


def test_gain_zero_and_quantisation_add_in_quadrature() -> None:
    """Hand calculation (JCGM 100, 5.1.2): 0.3 % of 10 kV, 5 V and 1 V / root 12 give 30.415 V."""
    scale = RecordedScale(gain=1.0, zero=0.0, u_gain=0.003, u_zero=5.0, code_low=0, code_high=65_535)
    assert scale_u(scale, 10_000.0) == pytest.approx((30.0**2 + 25.0 + 1.0 / 12.0) ** 0.5)


def test_a_straight_line_gives_the_published_example() -> None:
    """Outside check: JCGM 100:2008, H.3 (thermometer): y1 -0.1712, u 0.0029, y2 0.00218, u 0.00067."""
    t = np.array([21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511])
    b = np.array([-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160])
    y1, y2, u1, u2 = line_fit(t - 20.0, b)
    assert (y1, u1) == (pytest.approx(-0.1712, abs=5e-5), pytest.approx(0.0029, abs=5e-5))
    assert (y2, u2) == (pytest.approx(0.00218, abs=5e-6), pytest.approx(0.00067, abs=5e-6))


def test_scatter_of_a_mean_equals_the_textbook_for_independent_samples() -> None:
    """For white noise the stretches give s / root n, within the scatter of 16 stretches."""
    values = np.random.default_rng(2).normal(0.0, 3.0, 16_000)
    assert scatter_of_mean(values) == pytest.approx(3.0 / 16_000**0.5, rel=0.5)
    assert scatter_of_mean(np.array([5.0])) == 0.0


def test_slow_wandering_is_not_averaged_away() -> None:
    """Correlated noise keeps its uncertainty, which s / root n would hide."""
    slow = np.repeat(np.random.default_rng(3).normal(0.0, 3.0, 16), 1000)
    assert scatter_of_mean(slow) > 10 * slow.std() / len(slow) ** 0.5


def test_means_quotients_and_differences() -> None:
    """Hand calculation: 5000 V, u 15 V over 5 µA, u 0.05 µA is 1000 MΩ, u 10.44 MΩ."""
    ohms = quotient(Value(5000.0, 15.0), Value(5e-6, 5e-8))
    assert ohms.value == pytest.approx(1e9)
    assert ohms.u == pytest.approx(1e9 * (0.003**2 + 0.01**2) ** 0.5)
    less = difference(Value(5.0, 3.0), Value(1.0, 4.0))
    assert (less.value, less.u, less.expanded, less.low, less.high) == (4.0, 5.0, 10.0, -6.0, 14.0)
    assert less.relative == 2.5
    assert Value(0.0, 1.0).relative == float("inf")
    assert mean_value(SCALE, np.array([10.0, 10.0])).value == 10.0
