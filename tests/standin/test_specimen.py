"""The specimen's statistics and memory."""

from dataclasses import replace
from math import exp, log
from statistics import mean, median

import pytest

from hvhost.standin.params import SpecimenParams
from hvhost.standin.specimen import Specimen

PARAMS = SpecimenParams()


def lag_s(seed: int, share: float, params: SpecimenParams = PARAMS) -> float:
    """Time to the strike at this share of the drawn strength."""
    specimen = Specimen(params, seed)
    volts, t_s = specimen.strength_v * share, 0.0
    while not specimen.strikes(5e-3, volts):
        t_s += 5e-3
        if t_s > 60.0:
            break
    return t_s


def test_strength_is_weibull_distributed() -> None:
    """Median of a Weibull distribution: scale times (ln 2)^(1/shape) (textbook, IEC 62539's two parameters)."""
    drawn = [Specimen(PARAMS, seed).strength_v for seed in range(600)]
    assert median(drawn) == pytest.approx(17.5e3 * log(2.0) ** (1.0 / 25.0), rel=0.006)
    scaled = sum(v < 17.5e3 for v in drawn) / len(drawn)
    assert scaled == pytest.approx(1.0 - exp(-1.0), abs=0.06)


def test_statistical_lag_is_exponential_at_the_strength() -> None:
    """At the strength itself the mean lag is the stated one."""
    assert mean(lag_s(seed, 1.0) for seed in range(300)) == pytest.approx(0.5, rel=0.2)


def test_lag_shrinks_fast_above_the_strength() -> None:
    """Five per cent above, the lag is 1.05^60 = 18.7 times shorter."""
    assert mean(lag_s(seed, 1.05) for seed in range(300)) < 0.5 / 10.0


def test_nothing_strikes_well_below() -> None:
    """At three quarters of the strength a minute passes."""
    assert all(lag_s(seed, 0.75) > 59.0 for seed in range(3))


def test_location_keeps_the_strength_above_a_least() -> None:
    """With a least strength no specimen is weaker."""
    params = replace(PARAMS, strength_least_v=15e3, strength_shape=2.0)
    assert min(Specimen(params, seed).strength_v for seed in range(300)) > 15e3


def test_absorption_branch_charges_with_its_time_constant() -> None:
    """Each branch is an RC: 63.2 % after R C."""
    specimen = Specimen(replace(PARAMS, branches=((10e9, 0.1e-9),)), 1)
    specimen.absorb(1.0, 10e3)
    assert specimen.u[0] == pytest.approx(10e3 * (1.0 - exp(-1.0)))
    assert specimen.source_a() == pytest.approx(specimen.u[0] / 10e9)


def test_arc_energy_is_half_c_v_squared_and_what_the_arc_burns() -> None:
    """1/2 C V^2 at the strike (0.5 nF at 20 kV: 0.1 J) plus arc voltage times current times time."""
    specimen = Specimen(PARAMS, 1)
    specimen.strike(20e3)
    assert specimen.arc_energy_j == pytest.approx(0.1)
    specimen.burn(1.0, 2e-3)
    assert specimen.arc_energy_j == pytest.approx(0.1 + 60.0 * 2e-3)


def test_arc_holds_above_its_holding_current_and_goes_out_below() -> None:
    """Above it never, below after a random short time."""
    specimen = Specimen(PARAMS, 1)
    specimen.strike(10e3)
    assert not any(specimen.burn(1.0, 1e-3) for _ in range(50))
    assert specimen.burn(10.0, 0.1e-3)


def test_gap_recovers_its_strength_with_time() -> None:
    """Right after the quench a gap is weak, later it is as before."""
    params = replace(PARAMS, self_restoring=True)
    specimen = Specimen(params, 1)
    specimen.strike(10e3)
    specimen.quench()
    specimen.settle({})
    specimen.off_s = 0.01 * params.recovery_s
    assert specimen.strikes(1e-3, 9.9e3)
    later = Specimen(params, 1)
    later.strike(10e3)
    later.quench()
    later.settle({})
    later.off_s = 10.0 * params.recovery_s
    assert not later.strikes(1e-3, 9.9e3)


def test_lead_off_neither_absorbs_nor_strikes() -> None:
    """What is not connected does nothing."""
    specimen = Specimen(PARAMS, 1)
    specimen.settle({"lead-off": 1.0})
    specimen.absorb(10.0, 10e3)
    assert specimen.u == [0.0, 0.0, 0.0]
    assert not specimen.strikes(10.0, 1e9)
    assert (specimen.capacitance_f, specimen.conductance_s, specimen.branch_s) == (0.0, 0.0, 0.0)


def test_leak_and_short_lie_across_it() -> None:
    """Resistances across the specimen add as conductances."""
    specimen = Specimen(PARAMS, 1)
    specimen.settle({"leak": 50e6, "short": 1e3})
    assert specimen.conductance_s == pytest.approx(1.0 / 2e9 + 1.0 / 50e6 + 1e-3)
