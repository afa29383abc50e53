"""The measuring chain against published figures for dividers, RC corners, converters and shunts."""

from dataclasses import replace
from math import exp, pi, sqrt
from statistics import mean, pstdev

import pytest

from hvhost.standin.chain import Chain
from hvhost.standin.params import Adc, ChainParams, PlantParams, demo, small
from tests.standin.benches import tough


def settled(params: PlantParams, volts: float, amps: float = 0.0, faults: dict[str, float] | None = None) -> Chain:
    """A chain that has seen these values long enough."""
    chain = Chain(params, 1)
    chain.settle(faults or {})
    for _ in range(50):
        chain.step(10e-3, volts, volts, amps)
    return chain


@pytest.mark.parametrize(("high_ohm", "low_ohm", "low_f", "ratio", "corner_hz", "tau_s"), [
    # ratio = (R1 + R2) / R2, f = 1 / (2 pi R_th C), tau = R_th C with R_th = R1 R2 / (R1 + R2); figures computed by
    # hand from these textbook formulas
    (1e9, 100e3, 10e-9, 10001.0, 159.170858586, 9.99900010e-4),
    (1e9, 500e3, 10e-9, 2001.0, 31.8469041127, 4.99750125e-3),
    (100e6, 10e3, 100e-9, 10001.0, 159.170858586, 9.99900010e-4)])
def test_divider_ratio_and_corner(high_ohm: float, low_ohm: float, low_f: float, ratio: float, corner_hz: float,
                                  tau_s: float) -> None:
    """Ratio, time constant and corner frequency follow from the parts."""
    chain = replace(demo().chain, high_ohm=high_ohm, low_ohm=low_ohm, low_f=low_f)
    assert chain.ratio == pytest.approx(ratio, rel=1e-12)
    assert chain.tau_s == pytest.approx(tau_s, rel=1e-8)
    assert 1.0 / (2.0 * pi * chain.tau_s) == pytest.approx(corner_hz, rel=1e-9)


@pytest.mark.parametrize(("bits", "lsb_v"), [(10, 9.765625e-3), (12, 2.44140625e-3), (14, 0.6103515625e-3),
                                             (16, 152.587890625e-6)])
def test_converter_step_is_close_to_full_scale_over_two_to_the_n(bits: int, lsb_v: float) -> None:
    """Steps are 10 V / (2^N - 1): full scale is the last code, one count in 2^N off the 10 V / 2^N of textbooks."""
    adc = Adc(bits=bits, signed=False)
    assert 1.0 / adc.codes_per_v == pytest.approx(lsb_v * 2**bits / (2**bits - 1), rel=1e-12)
    assert 1.0 / adc.codes_per_v == pytest.approx(lsb_v, rel=1.0 / 2**bits * 1.001)
    assert (adc.low, adc.high) == (0, 2**bits - 1)


def test_signed_converter_limits() -> None:
    """Two's complement: one code more below than above."""
    assert (Adc(bits=16, signed=True).low, Adc(bits=16, signed=True).high) == (-32768, 32767)


def test_full_scale_reads_the_last_code() -> None:
    """The demo chain gives 10 V at 25 kV, and 10 V is code 32767."""
    assert settled(tough(), 25e3).convert(0.0, 0.0, True)[0] == 32767
    assert settled(tough(), 12.5e3).convert(0.0, 0.0, True)[0] in (16383, 16384)


def test_shunt_of_one_kiloohm_gives_one_volt_per_milliamp() -> None:
    """1 kΩ in the return is 1 V per mA (common practice), so 2 mA is a fifth of 10 V."""
    assert settled(tough(), 0.0, 2e-3).convert(0.0, 0.0, True)[1] == round(0.2 * 32767)


def test_step_response_is_first_order() -> None:
    """63.2 % after one time constant, within 0.1 % after 6.90776 of them (ln 1000)."""
    params = tough()
    chain = Chain(params, 1)
    chain.step(params.chain.tau_s, 10e3, 10e3, 0.0)
    assert chain.v_v == pytest.approx(10e3 * (1.0 - exp(-1.0)), rel=1e-9)
    for _ in range(1000):
        chain.step(params.chain.tau_s * 5.90776e-3, 10e3, 10e3, 0.0)
    assert chain.v_v == pytest.approx(10e3 * (1.0 - 1e-3), rel=1e-6)


def test_ramp_lags_by_slew_times_tau() -> None:
    """A low-pass follows a ramp with the lag slew times tau."""
    params = tough()
    chain = Chain(params, 1)
    for step in range(1000):
        chain.step(1e-3, step * 1.0, step + 1.0, 0.0)
    assert 1000.0 - chain.v_v == pytest.approx(1000.0 * params.chain.tau_s, rel=1e-9)


def test_noise_has_its_spread_and_no_mean() -> None:
    """Noise is Gaussian with the stated standard deviation, plus quantisation (LSB / sqrt 12)."""
    chain = settled(demo(), 1234.5)
    codes = [chain.convert(0.0, 0.0, True)[0] for _ in range(4000)]
    assert pstdev(codes) == pytest.approx(sqrt(0.7**2 + 1.0 / 12.0), rel=0.05)
    assert mean(codes) == pytest.approx(1234.5 / 25e3 * 32767, abs=0.1)


def test_codes_stop_at_the_limits() -> None:
    """Beyond full scale the code is the converter's limit, on both sides."""
    assert settled(tough(), 40e3, 50e-3).convert(0.0, 0.0, True) == (32767, 32767)
    assert settled(tough(), -40e3, -50e-3).convert(0.0, 0.0, True) == (-32768, -32768)


def test_current_is_clamped_before_the_filter() -> None:
    """The discharge of an arc cannot charge the filter beyond the clamp."""
    chain = Chain(tough(), 1)
    chain.step(1.0, 0.0, 0.0, 1.0)
    assert chain.i_a == pytest.approx(chain.clamp_a)
    assert chain.clamp_a == pytest.approx(11e-3)


def test_ripple_is_weaker_behind_the_divider() -> None:
    """At the corner frequency 1 / sqrt 2 of the ripple comes through."""
    params = tough()
    params = replace(params, supply=replace(params.supply, ripple_hz=1.0 / (2.0 * pi * params.chain.tau_s)))
    chain = settled(params, 10e3)
    period_s = 1.0 / params.supply.ripple_hz
    codes = [chain.convert(k * period_s / 400, 500.0, True)[0] for k in range(400)]
    assert (max(codes) - min(codes)) / 2 / 32767 * 25e3 == pytest.approx(500.0 / sqrt(2.0), rel=0.01)


def test_unpowered_monitor_reads_zero() -> None:
    """A monitor that loses its power with the supply tells nothing about the charge on the output."""
    params = tough()
    params = replace(params, chain=replace(params.chain, powered_after_cut=False))
    assert settled(params, 10e3).convert(0.0, 0.0, False)[0] == 0
    assert settled(params, 10e3).convert(0.0, 0.0, True)[0] > 13000


@pytest.mark.parametrize(("fault", "codes"), [
    ({"divider-open": 1.0}, (0, 3277)), ({"divider-low-open": 1.0}, (32767, 3277)),
    ({"shunt-open": 1.0}, (13107, 32767)),
    ({"shunt-short": 1.0}, (13107, 0)), ({"swapped": 1.0}, (3277, 13107)), ({"v-reversed": 1.0}, (-13107, 3277)),
    ({"i-reversed": 1.0}, (13107, -3277)), ({"v-saturated": 1.0}, (32767, 3277)),
    ({"i-saturated": -1.0}, (13107, -32768)),
    ({"v-offset": 300.0}, (13407, 3277)), ({"i-offset": -300.0}, (13107, 2977)), ({"v-gain": -0.1}, (11796, 3277)),
    ({"v-spike": 8000.0}, (21107, 3277)), ({"v-dip": 8000.0}, (5107, 3277)), ({"i-spike": 9000.0}, (13107, 12277)),
    ({"auxiliary-low": 1.0}, (10485, 2621)), ({"polarity-wrong": 1.0}, (-13107, -3277))], ids=lambda f: str(f)[:24])
def test_fault_changes_the_codes(fault: dict[str, float], codes: tuple[int, int]) -> None:
    """10 kV and 1 mA, seen through each fault of the chain."""
    assert settled(tough(), 10e3, 1e-3, fault).convert(0.0, 0.0, True) == codes


def test_stuck_code_stands_still() -> None:
    """A stuck converter repeats its last code whatever happens."""
    chain = settled(demo(), 10e3)
    last = chain.convert(0.0, 0.0, True)
    chain.settle({"v-stuck": 1.0, "i-stuck": 1.0})
    chain.step(1.0, 0.0, 0.0, 0.0)
    assert {chain.convert(0.0, 0.0, True) for _ in range(20)} == {last}


def test_drift_begins_when_the_fault_does() -> None:
    """A drifting monitor starts from right, whenever it begins."""
    chain = settled(tough(), 10e3)
    chain.settle({"v-drift": 20.0}, 100.0)
    assert [chain.convert(t_s, 0.0, True)[0] for t_s in (100.0, 110.0)] == [13107, 13307]


def test_negative_bench_reads_oriented_codes_by_its_sign() -> None:
    """The small bench's converters are unipolar: its chain turns the negative output into positive codes."""
    chain: ChainParams = small().chain
    v, _ = settled(replace(small(), chain=replace(chain, v_adc=replace(chain.v_adc, noise_lsb=0.0))), 2.5e3).convert(
        0.0, 0.0, True)
    assert v > chain.v_adc.offset_code + 1000
