"""Leakage and resistance at reading times."""

from pathlib import Path

import pytest

from hvhost.measure.leakage import Reading
from hvhost.measure.result import evaluate
from hvhost.measure.uncertainty import Value
from hvhost.record.blockfile import read_blocks
from hvhost.record.data import load_run
from hvhost.record.entries import BlockEntry, Entry
from tests.measure.making import result_of
from tests.record.making import OWN_F, Case, made_run


def reading(amps: Value, volts: Value | None = None) -> Reading:
    """One reading at 5 kV."""
    return Reading(number=1, hold="h", at_s=60.0, origin="start of hold", taken=True, row=0, window_s=1.0,
                   volts=volts or Value(5000.0, 0.0), amps=amps)


@pytest.mark.parametrize(("amps", "megohms"), [(7.5e-6, 666.667), (5.0e-6, 1000.0), (1.25e-6, 4000.0)])
def test_resistance_of_the_worked_example(amps: float, megohms: float) -> None:
    """Outside check, by definition (IEEE 43: V / I): 5 kV at 7.5, 5.0 and 1.25 µA."""
    ohms = reading(Value(amps, 0.0)).ohms
    assert ohms is not None
    assert ohms.value / 1e6 == pytest.approx(megohms, rel=1e-5)


def test_a_current_that_cannot_be_told_from_zero_bounds_the_resistance_only() -> None:
    """0.1 µA ± 0.4 µA at 5 kV ± 30 V is at least 4970 V / 0.5 µA, and no more is said."""
    found = reading(Value(1e-7, 2e-7), Value(5000.0, 15.0))
    assert found.ohms is None
    assert found.ohms_at_least == pytest.approx(4970.0 / 5e-7)
    assert reading(Value(-1e-6, 2e-7)).ohms_at_least is None


def test_readings_are_taken_at_their_times_from_their_origin(tmp_path: Path) -> None:
    """10 kV over 1 GΩ is 10 µA at 2 s and at 4 s of the hold."""
    two, four = result_of(tmp_path).readings
    for found in (two, four):
        assert found.amps is not None
        assert found.amps.value == pytest.approx(10e-6, abs=0.05e-6)
        assert found.amps.u == pytest.approx((0.2e-6**2 + (0.003 * 10e-6) ** 2 + (1.34e-7 / 12**0.5) ** 2) ** 0.5,
                                             rel=0.05)
    assert four.row - two.row == 2000


def test_the_bench_s_own_draw_is_taken_off_with_its_uncertainty(tmp_path: Path) -> None:
    """A divider of 5 GΩ draws 2 µA at 10 kV, known to a tenth: 8 µA are left, u grows by 0.2 µA in quadrature."""
    bench = {"own_f": OWN_F, "own_s": 2e-10}
    found = result_of(tmp_path, Case(meta={"bench": bench})).readings[0]
    assert found.own_a == pytest.approx(2e-6, rel=1e-3)
    assert found.amps is not None
    assert found.amps.value == pytest.approx(8e-6, abs=0.05e-6)
    assert found.amps.u == pytest.approx((0.2e-6**2 + 0.2e-6**2) ** 0.5, rel=0.05)


def test_a_reading_that_was_not_reached_says_so(tmp_path: Path) -> None:
    """A breakdown at 3 s leaves the reading at 4 s untaken."""
    two, four = result_of(tmp_path, Case(break_at_s=3.0)).readings
    assert (two.taken, four.taken, four.amps) == (True, False, None)


@pytest.mark.parametrize("before", [1, 500, 1500])
def test_a_record_that_ends_before_the_reading_time_has_no_reading(tmp_path: Path, before: int) -> None:
    """The board died in the hold: what the record's last samples say is no reading of a later time."""
    folder = made_run(tmp_path)
    due = evaluate(load_run(folder)).readings[1].row
    rows, cut = 0, 0
    for entry in read_blocks(folder.blocks):
        assert isinstance(entry, Entry)
        if isinstance(entry.content, BlockEntry):
            rows += entry.content.block.pairs
            if rows > due - 65 - before:
                cut = entry.offset
                break
    folder.blocks.write_bytes(folder.blocks.read_bytes()[:cut])
    two, four = evaluate(load_run(folder)).readings
    assert (two.taken, four.taken, four.amps) == (True, False, None)
