"""Disruptive discharges."""

from pathlib import Path

import pytest

from hvhost.measure.breakdowns import breakdowns_of, voltage_before
from tests.measure.making import data_of
from tests.record.making import Case


def test_a_breakdown_is_found_once_whoever_saw_it(tmp_path: Path) -> None:
    """MCU and host report the same discharge: one, with the voltage before it and the time to the cut."""
    run = data_of(tmp_path, Case(break_at_s=3.0))
    (found,) = breakdowns_of(run)
    assert found.seen_by == ("MCU", "host")
    assert found.index == 320 + 5000 + 3000 + 1
    assert found.fall_row == 8320
    assert found.volts.value == pytest.approx(10_000.0, abs=8.0)
    assert found.volts.expanded < 80.0
    assert found.to_stop_s == pytest.approx(0.0032, abs=1e-9)  # from the last whole sample, 1 ms before the fall
    assert found.kind == "kind not inspected"


def test_a_lower_is_no_breakdown(tmp_path: Path) -> None:
    """A run that comes to its end has none."""
    assert breakdowns_of(data_of(tmp_path, Case(hold_s=1.0))) == ()


def test_a_run_without_samples_has_none_and_the_edges_are_safe(tmp_path: Path) -> None:
    """Looking around the first and the last row stays inside the record."""
    run = data_of(tmp_path, Case(hold_s=0.1))
    for row in (0, 1, run.rows - 1):
        assert voltage_before(run, row)[1].u > 0.0
