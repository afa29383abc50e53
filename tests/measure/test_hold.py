"""The voltage over a hold."""

from pathlib import Path

import numpy as np
import pytest

from hvhost.measure.hold import longest_true, trailing_mean
from tests.measure.making import result_of
from tests.record.making import LEVEL_V, Case


def test_mean_and_uncertainty_equal_the_hand_calculation(tmp_path: Path) -> None:
    """10 kV with 0.3 % and 5 V (k = 1): u is 30.41 V; noise adds a tenth of a volt."""
    (hold,) = result_of(tmp_path).holds
    assert hold.mean is not None
    assert hold.mean.value == pytest.approx(LEVEL_V, abs=0.5)
    assert hold.mean.u == pytest.approx((30.0**2 + 5.0**2) ** 0.5, abs=0.1)
    assert hold.level_met
    assert hold.long_enough
    assert hold.inside_s == pytest.approx(4.8, abs=0.3)


def test_a_voltage_outside_its_tolerance_counts_no_time(tmp_path: Path) -> None:
    """2 % low under a tolerance of 1 % (IEC 60060-1, up to 60 s): not one second counts."""
    (hold,) = result_of(tmp_path, Case(level_v=9_800.0)).holds
    assert not hold.level_met
    assert hold.inside_s == 0.0
    assert not hold.long_enough


def test_missing_samples_are_counted_and_give_no_time(tmp_path: Path) -> None:
    """A gap in the hold is counted and its time is not credited."""
    (hold,) = result_of(tmp_path, Case(lose=500)).holds
    assert hold.missing == 500
    assert hold.inside_s <= 4.8


def test_trailing_mean_and_longest_stretch_by_hand() -> None:
    """Small numbers worked by hand."""
    assert trailing_mean(np.array([1.0, 3.0, 5.0, 7.0]), 2).tolist() == [1.0, 2.0, 4.0, 6.0]
    assert longest_true(np.array([True, True, False, True, True, True])) == 3
    assert longest_true(np.array([], dtype=bool)) == 0
    assert longest_true(np.array([False])) == 0
