"""Stored energy and charge, and the time to the touch threshold, against published limits and closed forms.

Limits of IEC 61010-1 (third edition) 6.3.1: 60 V d.c., 35 V where wet, 45 µC up to 15 kV, 350 mJ above; from memory
with high confidence, the charge and energy figures also as quoted from IEC 60335-1 8.1.4 and EN 50191 1.2.
"""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.bench.hazards import (
    bleed_times_to,
    capacitance_limit_f,
    charging_current_a,
    stored,
    stored_charge_c,
    stored_energy_j,
    time_to_s,
    touch_threshold_v,
    voltage_after_v,
)


@pytest.mark.parametrize(("farad", "volt", "joule"), [
    (10e-9, 20e3, 2.0), (1e-9, 20e3, 0.2), (100e-12, 20e3, 0.02), (2e-9, 60e3, 3.6), (1e-6, 1e3, 0.5),
    (32e-6, 5e3, 400)])
def test_energy(farad: float, volt: float, joule: float) -> None:
    """E = CV²/2 (closed form)."""
    assert stored_energy_j(farad, volt) == pytest.approx(joule, rel=1e-12)
    assert stored_energy_j(farad, -volt) == pytest.approx(joule, rel=1e-12)


@pytest.mark.parametrize(("volt", "farad"), [
    (450, 0.1e-6), (1e3, 45e-9), (5e3, 9e-9), (10e3, 4.5e-9), (15e3, 3e-9),  # 45 µC
    (15.001e3, 3.1107e-9), (20e3, 1.75e-9), (30e3, 777.78e-12), (60e3, 194.44e-12)])  # 350 mJ
def test_capacitance_at_the_limit(volt: float, farad: float) -> None:
    """The capacitance that may be touched at a voltage."""
    assert capacitance_limit_f(volt) == pytest.approx(farad, rel=2e-5)


def test_limit_steps_up_at_15_kv() -> None:
    """Both rules nearly meet at 15 kV, and the limit steps up there: 3.00 nF at it, 3.11 nF just above."""
    assert capacitance_limit_f(15e3) == pytest.approx(3e-9, rel=1e-12)
    assert capacitance_limit_f(math.nextafter(15e3, 1e9)) == pytest.approx(3.1111e-9, rel=2e-5)
    assert stored_energy_j(3e-9, 15e3) == pytest.approx(0.3375, rel=1e-12)
    assert stored(3.05e-9, 15e3).dangerous
    assert not stored(3.05e-9, math.nextafter(15e3, 1e9)).dangerous


@pytest.mark.parametrize(("volt", "wet", "dangerous"), [(60.0, False, False), (60.1, False, True), (35.0, True, False),
                                                        (35.1, True, True), (-60.1, False, True)])
def test_touch_threshold(volt: float, wet: bool, dangerous: bool) -> None:
    """60 V d.c., 35 V where wet: at the threshold not yet, above it by charge."""
    assert stored(1.0, volt, wet).dangerous is dangerous
    assert touch_threshold_v(wet) == (35.0 if wet else 60.0)


def test_stored_says_its_rule() -> None:
    """The result keeps its inputs and names the rule that judged."""
    result = stored(1.5e-9, 24e3)
    assert result.energy_j == pytest.approx(0.432)
    assert result.charge_c == pytest.approx(stored_charge_c(1.5e-9, 24e3)) == pytest.approx(36e-6)
    assert result.dangerous
    assert "350 mJ" in result.rule
    assert "45 µC" in stored(1e-9, 1e3).rule


@pytest.mark.parametrize(("volt", "taus"), [
    (400, 1.8971199848858813), (1e3, 2.8134107167600364), (5e3, 4.422848629194137), (10e3, 5.115995809754082),
    (20e3, 5.809142990314028), (30e3, 6.214608098422191), (60e3, 6.907755278982137)])
def test_bleed_times_to_60_v(volt: float, taus: float) -> None:
    """t = tau ln(V0 / V), to 60 V (closed form)."""
    assert bleed_times_to(volt, 60.0) == pytest.approx(taus, rel=1e-12)


def test_examples_of_waiting() -> None:
    """10 nF through a 1 GΩ divider from 20 kV takes 58.0914 s to 60 V; five time constants leave 134.8 V."""
    assert time_to_s(20e3, 60.0, 10e-9 * 1e9) == pytest.approx(58.0914, abs=5e-5)
    assert time_to_s(20e3, 60.0, 10e-9 * 100e6) == pytest.approx(5.80914, abs=5e-6)
    assert voltage_after_v(20e3, 1.0, 5.0) == pytest.approx(134.8, abs=0.05)
    assert time_to_s(20e3, 50.0, 1.0) == pytest.approx(5.991465, abs=5e-7)


@given(st.floats(61.0, 1e5), st.floats(1e-3, 1e3))
def test_voltage_after_the_time_is_the_threshold(volt: float, tau: float) -> None:
    """Waiting that long leaves the threshold, no more."""
    assert voltage_after_v(volt, tau, time_to_s(volt, 60.0, tau)) == pytest.approx(60.0, rel=1e-9)


def test_below_the_threshold_there_is_no_waiting() -> None:
    """A voltage below the threshold needs no time."""
    assert bleed_times_to(59.0, 60.0) == 0.0
    assert time_to_s(-59.0, 60.0, 10.0) == 0.0


def test_charging_current() -> None:
    """I = C dV/dt: 2 nF at 5 kV/s draw 10 µA."""
    assert charging_current_a(2e-9, 5e3) == pytest.approx(10e-6, rel=1e-12)
