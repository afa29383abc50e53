"""Calibrated blocks."""

import numpy as np
import pytest

from hvhost.bench.file import load_bench
from hvhost.guard.limits import orientation_of
from hvhost.samples.assembler import Assembler
from hvhost.samples.calibrated import calibrated
from tests.samples.build import CONFIGS, wire


@pytest.mark.parametrize("name", ["demo", "small"])
def test_blocks_come_out_in_volts_and_amps_of_the_benchs_polarity(name: str) -> None:
    """Raw codes through the bench's line, oriented; codes at the converter's limit are excluded on their channel."""
    bench = load_bench(CONFIGS / f"{name}.bench.yaml")
    orientation = orientation_of(bench)
    volt, amp = bench.voltage.monitor, bench.current.monitor
    top_v = volt.code_high if volt.sign == 1 else volt.code_low
    top_i = amp.code_high if amp.sign == 1 else amp.code_low
    codes = [volt.code(0.5 * bench.v_max), amp.code(0.25 * bench.i_max), top_v, amp.code_zero, volt.code_zero, top_i]
    block = Assembler(orientation, 10_000, 10).take(wire(0, codes), 0.0)
    assert block is not None
    found = calibrated(block, bench, orientation)
    assert found.volts[0] == pytest.approx(0.5 * bench.v_max, abs=volt.quantum)
    assert found.amps[0] == pytest.approx(0.25 * bench.i_max, abs=amp.quantum)
    assert found.volts[1] > bench.v_max
    assert found.excluded_v.tolist() == [False, True, False]
    assert found.excluded_i.tolist() == [False, False, True]
    assert found.excluded.tolist() == [False, True, True]
    np.testing.assert_array_equal(found.ticks, [0, 10, 20])
