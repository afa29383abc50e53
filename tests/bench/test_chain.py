"""Divider, RC corner and converter steps against published and closed-form values."""

import math

import pytest

from hvhost.bench.chain import (
    corner_hz,
    divider_ratio,
    lower_arm_ohm,
    quantisation_u,
    quantum,
    settling_s,
    signal_to_noise_db,
    source_ohm,
)


@pytest.mark.parametrize(("r1", "r2", "c", "ratio", "r_th", "f_c", "tau"), [
    # Closed form, computed with 12 digits: R_th = R1 R2 / (R1 + R2), f_c = 1 / (2 pi R_th C).
    (1e9, 100e3, 10e-9, 10001, 99990.0009999, 159.170858586, 9.99900010e-4),
    (1e9, 500e3, 10e-9, 2001, 499750.124938, 31.8469041127, 4.99750125e-3),
    (100e6, 10e3, 100e-9, 10001, 9999.00009999, 159.170858586, 9.99900010e-4)])
def test_divider_and_corner(r1: float, r2: float, c: float, ratio: float, r_th: float, f_c: float, tau: float) -> None:
    """Ratio, source resistance, corner and time constant of three common dividers."""
    assert divider_ratio(r1, r2) == pytest.approx(ratio, rel=1e-12)
    assert source_ohm(r1, r2) == pytest.approx(r_th, rel=1e-11)
    assert corner_hz(source_ohm(r1, r2), c) == pytest.approx(f_c, rel=1e-11)
    assert source_ohm(r1, r2) * c == pytest.approx(tau, rel=1e-8)


def test_lower_arm_counts_itself() -> None:
    """20 kV to 10 V under 1 GΩ needs 500250.125 Ω, not 500 kΩ: the lower arm's own share matters 0.05 %."""
    assert lower_arm_ohm(1e9, 20e3, 10.0) == pytest.approx(500250.125063, rel=1e-12)
    assert 20e3 / divider_ratio(1e9, lower_arm_ohm(1e9, 20e3, 10.0)) == pytest.approx(10.0, rel=1e-12)


@pytest.mark.parametrize(("fraction", "taus"), [
    (0.01, 4.60517), (0.001, 6.90776), (0.5 / 2**12, 9.01091), (0.5 / 2**16, 11.78350)])
def test_settling(fraction: float, taus: float) -> None:
    """Time constants to 1 %, 0.1 %, half a code of 12 and of 16 bits (closed form)."""
    assert settling_s(1.0, fraction) == pytest.approx(taus, abs=5e-6)


@pytest.mark.parametrize(("bits", "db"), [(10, 61.9669), (12, 74.0081), (14, 86.0493), (16, 98.0905)])
def test_signal_to_noise(bits: int, db: float) -> None:
    """6.0206 N + 1.7609 dB: the textbook figure of an ideal converter."""
    assert signal_to_noise_db(bits) == pytest.approx(db, abs=5e-5)


def test_step_and_its_uncertainty() -> None:
    """q / sqrt 12 is the rectangular distribution's standard deviation (JCGM 100 4.3.7)."""
    assert quantisation_u(quantum(10.0, 12)) == pytest.approx(10.0 / 4096 / math.sqrt(12), rel=1e-15)
