"""A plant made to a bench file's measure reads back in the bench's own scales."""

from dataclasses import replace

import pytest

from hvhost.bench.file import load_bench
from hvhost.cli.plantof import PIN_V, plant_of
from tests.cli.conftest import CONFIGS


@pytest.mark.parametrize("name", ["demo", "small"])
def test_full_scale_reads_full_scale(name: str) -> None:
    """The code that the chain gives at the bench's ceiling is the one that the bench file expects, within two."""
    bench = load_bench(CONFIGS / f"{name}.bench.yaml")
    plant = plant_of(bench)
    chain = plant.chain
    pin_v = abs(bench.v_max) / chain.ratio * chain.buffer_gain
    code = chain.v_adc.offset_code + pin_v * chain.v_adc.codes_per_v * chain.v_sign
    wanted = bench.voltage.monitor.code(bench.v_max)
    assert abs(abs(code - chain.v_adc.offset_code) - abs(wanted - bench.voltage.monitor.zero)) <= 2, (code, wanted)
    assert plant.v_dac.full_v == PIN_V
    assert plant.supply.program_full_v == PIN_V
    assert plant.contacts.arm_input == bench.arm_input
    assert plant.chain.polarity == bench.polarity


@pytest.mark.parametrize("name", ["demo", "small"])
def test_the_bleed_time_is_the_bench_s(name: str) -> None:
    """R C of the bleed on the bench's capacitance is the bleed time of the file."""
    bench = load_bench(CONFIGS / f"{name}.bench.yaml")
    assert plant_of(bench).supply.bleed_ohm * bench.stored_f == pytest.approx(bench.bleed_s)


@pytest.mark.parametrize("means", [{"inhibit", "programming"}, {"programming"}, {"relay", "inhibit", "clear"}])
def test_the_plant_has_the_means_that_the_bench_has(means: set[str]) -> None:
    """What the bench file does not list is not in the wiring: no relay, no inhibit, no clear."""
    contacts = plant_of(replace(load_bench(CONFIGS / "demo.bench.yaml"), cut_path=frozenset(means)))
    assert (contacts.contacts.relay, contacts.contacts.inhibit, contacts.supply.clear_input) == (
        "relay" in means, "inhibit" in means, "clear" in means)
