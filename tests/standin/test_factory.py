"""Commissioned settings are those of the example bench files."""

from pathlib import Path

import pytest

from hvhost.bench.file import load_bench
from hvhost.bench.settings_from import settings_of
from hvhost.standin.factory import factory_settings
from hvhost.standin.params import PROFILES
from hvhost.wire.settings import differences
from hvhost.words.errors import UsageFault

CONFIGS = Path(__file__).parents[2] / "configs"


@pytest.mark.parametrize("profile", ["demo", "small"])
def test_settings_are_those_of_the_example_bench(profile: str) -> None:
    """Not one setting differs from what commissioning the example file would write."""
    assert differences(factory_settings(profile), settings_of(load_bench(CONFIGS / f"{profile}.bench.yaml"))) == ()


@pytest.mark.parametrize("profile", ["demo", "small"])
def test_plant_is_the_example_bench(profile: str) -> None:
    """The plant's own scaling equals the file's: bits, sign, full scales, capacitances."""
    bench, params = load_bench(CONFIGS / f"{profile}.bench.yaml"), PROFILES[profile]()
    chain, supply = params.chain, params.supply
    assert supply.v_full == pytest.approx(bench.rated_v)
    assert supply.i_full == pytest.approx(bench.rated_a)
    assert chain.polarity == bench.polarity
    assert bench.voltage.program.value((1 << params.v_dac.bits) - 1) == pytest.approx(supply.v_full)
    assert bench.current.program.value((1 << params.i_dac.bits) - 1) == pytest.approx(supply.i_full)
    at_pin_v = bench.voltage.monitor.value(chain.v_adc.high)
    assert at_pin_v == pytest.approx(chain.v_adc.full_v * chain.ratio / chain.buffer_gain, rel=1e-4)
    at_pin_a = bench.current.monitor.value(chain.i_adc.high)
    assert at_pin_a == pytest.approx(chain.i_adc.full_v / chain.shunt_ohm / chain.shunt_gain, rel=1e-4)
    assert (supply.output_f, params.cable_f) == pytest.approx((bench.output_f, bench.cable_f))
    assert chain.at_specimen == bench.monitor_at_specimen
    assert chain.powered_after_cut == bench.monitor_powered_after_cut
    assert params.contacts.arm_input == bench.arm_input
    # the bench file's bleed time is for the largest specimen: the plant's own is not longer
    conductance = 1.0 / supply.bleed_ohm + 1.0 / (chain.high_ohm + chain.low_ohm)
    assert (supply.output_f + params.cable_f + params.specimen.capacitance_f) / conductance <= bench.bleed_s


def test_every_profile_has_settings() -> None:
    """A board of each profile can be fresh from commissioning."""
    assert [factory_settings(profile)["polarity"] for profile in PROFILES] == [1, 1, -1]


def test_unknown_profile_is_refused() -> None:
    """A profile outside the list is a wrong command line."""
    with pytest.raises(UsageFault):
        factory_settings("large")
