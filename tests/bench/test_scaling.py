"""Codes to SI and back, with the uncertainty of it."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.bench.chain import quantisation_u, quantum
from hvhost.bench.scaling import Calibration, Channel, Scale
from hvhost.words.errors import CommandRefused


def scale(gain: float = 0.5, zero: float = 0.0, u_gain: float = 0.001, u_zero: float = 1.0, low: int = -32768,
          high: int = 32767) -> Scale:
    """A monitor scale with handy numbers."""
    return Scale(gain=gain, zero=zero, u_gain=u_gain, u_zero=u_zero, code_low=low, code_high=high)


SCALES = st.builds(scale, gain=st.floats(1e-9, 10.0) | st.floats(-10.0, -1e-9), zero=st.floats(-2000.0, 2000.0))


@given(SCALES, st.integers(-32768, 32767))
def test_code_and_value_are_inverse(s: Scale, code: int) -> None:
    """Every code comes back from its own value."""
    assert s.code(s.value(code)) == code


@given(SCALES, st.integers(-32768, 32767))
def test_codes_above_zero_rise_with_the_value(s: Scale, code: int) -> None:
    """Oriented codes: sign times (raw - zero), and the value they stand for is the raw code's value."""
    above = s.above_zero(code)
    assert above == s.sign * (code - s.code_zero)
    assert s.value_above(above) == pytest.approx(s.value(code), rel=1e-9, abs=1e-9 * s.quantum)
    assert s.code_above(s.value(code)) == above
    assert s.value_above(above + 1) > s.value_above(above)


@given(SCALES, st.lists(st.integers(-32768, 32767), min_size=1, max_size=40))
def test_array_agrees_with_single_values(s: Scale, codes: list[int]) -> None:
    """The array form is the same arithmetic."""
    assert list(s.values(np.array(codes, dtype=np.int16))) == [s.value(code) for code in codes]


@given(SCALES, st.integers(-30000, 30000), st.floats(-0.49, 0.49))
def test_nearest_code(s: Scale, code: int, part: float) -> None:
    """A value within half a code gives the nearest code."""
    assert s.code(s.gain * (code + part - s.zero)) == code


def test_out_of_reach_is_refused() -> None:
    """A value beyond the converter is the caller's mistake; the range's end, one step above, is granted."""
    s = scale(low=0, high=65535, gain=25e3 / 65536)
    assert s.code(25e3) == 65535
    with pytest.raises(CommandRefused) as caught:
        s.code(25.01e3)
    assert "between 0 and 24999.6" in str(caught.value)
    with pytest.raises(CommandRefused):
        s.code(-10.0)


@pytest.mark.parametrize(("bits", "step_10v", "noise_uv", "on_20_kv", "on_10_ma"), [
    # Quantisation of common converters, q = FS / 2**N and q / sqrt 12 (computed in closed form; also any textbook on
    # converters): step of 10 V, rms noise in µV, step of 20 kV in V, of 10 mA in A.
    (10, 9.765625e-3, 2819.093, 19.53125, 9.765625e-6), (12, 2.44140625e-3, 704.7733, 4.8828125, 2.44140625e-6),
    (14, 0.6103515625e-3, 176.1933, 1.220703125, 0.6103515625e-6),
    (16, 152.587890625e-6, 44.04833, 0.30517578125, 0.152587890625e-6)])
def test_quantisation(bits: int, step_10v: float, noise_uv: float, on_20_kv: float, on_10_ma: float) -> None:
    """Steps and quantisation noise are the published ones, and enter the uncertainty of a scale."""
    assert quantum(10.0, bits) == pytest.approx(step_10v, rel=1e-12)
    assert quantum(20e3, bits) == pytest.approx(on_20_kv, rel=1e-12)
    assert quantum(10e-3, bits) == pytest.approx(on_10_ma, rel=1e-12)
    assert quantisation_u(step_10v) * 1e6 == pytest.approx(noise_uv, abs=5e-5 * noise_uv)
    ideal = Scale(gain=on_20_kv, zero=0, u_gain=0, u_zero=0, code_low=0, code_high=(1 << bits) - 1)
    assert ideal.u(10e3) == pytest.approx(on_20_kv / math.sqrt(12), rel=1e-12)
    assert ideal.u_mean(10e3) == 0.0


def test_uncertainty_combines_in_quadrature() -> None:
    """3 % of 100 V and 4 V of zero give 5 V (JCGM 100 5.1.2), quantisation beside."""
    s = scale(gain=1e-9, u_gain=0.03, u_zero=4.0)
    assert s.u_mean(100.0) == pytest.approx(5.0, rel=1e-12)
    assert s.u(100.0) == pytest.approx(5.0, rel=1e-12)
    assert scale(gain=12.0, u_gain=0.03, u_zero=4.0).u(100.0) == pytest.approx(math.sqrt(25 + 12.0), rel=1e-12)


def test_correlated_line_is_that_of_the_guide() -> None:
    """JCGM 100:2008 (GUM) H.3: u(y1) 0.0029, u(y2) 0.00067, r -0.930 give u(b(30 °C)) = 0.0041 °C.

    Digits beyond the published ones are computed from the data of table H.6; without the correlation the wrong 0.00727
    would come out.
    """
    line = Scale(gain=1.0, zero=0.0, u_gain=0.000667938773227832, u_zero=0.00287759783515995, r=-0.930429603093,
                 code_low=-1, code_high=1)
    assert line.u_mean(10.0) == pytest.approx(0.0041, abs=5e-5)
    assert line.u_mean(10.0) == pytest.approx(0.00413859575285495, rel=1e-9)
    uncorrelated = Scale(gain=1.0, zero=0.0, u_gain=line.u_gain, u_zero=line.u_zero, code_low=-1, code_high=1)
    assert uncorrelated.u_mean(10.0) == pytest.approx(0.00727, abs=5e-6)


def test_fully_correlated_uncertainties_never_turn_imaginary() -> None:
    """r = -1 cancels exactly; rounding must not make the square negative."""
    s = Scale(gain=1.0, zero=0.0, u_gain=0.1, u_zero=0.1 * 0.3, r=-1.0, code_low=-1, code_high=1)
    assert s.u_mean(0.3) == pytest.approx(0.0, abs=1e-9)


@given(SCALES, st.floats(-1e4, 1e4), st.floats(0.1, 10.0))
def test_uncertainty_scales(s: Scale, value: float, factor: float) -> None:
    """Another unit scales value and uncertainty alike."""
    other = Scale(gain=s.gain * factor, zero=s.zero, u_gain=s.u_gain, u_zero=s.u_zero * factor, code_low=s.code_low,
                  code_high=s.code_high)
    assert other.u(value * factor) == pytest.approx(s.u(value) * factor, rel=1e-9)


def test_fitted_line_replaces_the_files() -> None:
    """A calibration changes the line and its source, never the converter's limits."""
    fitted = scale().calibrated(Calibration(gain=0.51, zero=-3.2, u_gain=2e-4, u_zero=0.3, r=-0.4, source="run 12"))
    assert (fitted.gain, fitted.zero, fitted.r, fitted.source) == (0.51, -3.2, -0.4, "run 12")
    assert (fitted.code_low, fitted.code_high) == (-32768, 32767)
    assert fitted.code_zero == -3
    assert fitted.value_above(0) == pytest.approx(0.51 * 0.2)


def test_monitor_codes_per_word() -> None:
    """A falling monitor gives a negative map."""
    channel = Channel(program=scale(gain=0.4, low=0, high=65535), monitor=scale(gain=-0.8), signed=True)
    assert channel.monitor_per_word == -0.5
