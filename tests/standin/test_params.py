"""Presets and changes by key=value."""

import pytest

from hvhost.standin.params import PROFILES, Dac, changed, demo
from hvhost.words.errors import UsageFault


@pytest.mark.parametrize(("change", "path", "value"), [
    ("specimen.strength_v=12 kV", "specimen.strength_v", 12e3), ("v_dac.bits=12", "v_dac.bits", 12),
    ("specimen.self_restoring=yes", "specimen.self_restoring", True), ("tip_ohm=1 MΩ", "tip_ohm", 1e6),
    ("chain.v_adc.noise_lsb=2", "chain.v_adc.noise_lsb", 2.0), ("cable_f=1 nF", "cable_f", 1e-9),
    ("supply.slew_v_per_s=5 kV/s", "supply.slew_v_per_s", 5e3), ("panel_a=1 mA", "panel_a", 1e-3),
    ("name=mine", "name", "mine"), ("supply.ripple_hz=50 Hz", "supply.ripple_hz", 50.0)])
def test_change_reaches_its_field(change: str, path: str, value: object) -> None:
    """A key is the path to a field, a value a quantity with its unit."""
    got: object = changed(demo(), [change])
    for name in path.split("."):
        got = getattr(got, name)
    assert got == value


@pytest.mark.parametrize(("change", "hint"), [
    ("specimen.strenth_v=12 kV", "nearest: strength_v"), ("specimen=3", "nearest: specimen"), ("name.x=3", "name"),
    ("specimen.strength_v=12 KV", "12 kV"), ("specimen.strength_v", "key=value"), ("v_dac.bits=1.5", "whole"),
    ("specimen.self_restoring=true", "yes or no"), ("specimen.branches=3", "single value")])
def test_wrong_change_is_refused(change: str, hint: str) -> None:
    """The message names the nearest key or the kind of value."""
    with pytest.raises(UsageFault) as refused:
        changed(demo(), [change])
    assert hint in str(refused.value)


@pytest.mark.parametrize("name", PROFILES)
def test_profiles_carry_their_name(name: str) -> None:
    """Each profile builds, and is called what it is asked for by."""
    assert PROFILES[name]().name == name


def test_last_code_is_full_programming_voltage() -> None:
    """16 bits unipolar: code 65535 gives 10 V."""
    assert Dac(bits=16).volts_per_code * 65535 == pytest.approx(10.0)
