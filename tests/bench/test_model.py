"""The frozen bench: what it derives from its own fields."""

from dataclasses import FrozenInstanceError, replace
from pathlib import Path

import pytest

from hvhost.bench.file import load_bench
from hvhost.bench.scaling import Calibration
from hvhost.bench.settings_from import settings_of
from hvhost.wire.vocabulary import Fitted

BENCH = load_bench(Path(__file__).parents[2] / "configs" / "demo.bench.yaml")


def test_is_frozen() -> None:
    """Nothing changes a bench after it has been checked."""
    with pytest.raises(FrozenInstanceError):
        BENCH.v_max = 30e3  # type: ignore[misc]


@pytest.mark.parametrize(("means", "back", "alone"), [
    ({"programming"}, set(), True), ({"relay"}, {"relay"}, False), ({"clear"}, set(), True), (set(), set(), True),
    ({"inhibit", "programming"}, {"inhibit"}, False), ({"relay", "inhibit"}, set(), True),
    ({"relay", "inhibit"}, {"relay"}, False)])
def test_programming_only(means: set[str], back: set[str], alone: bool) -> None:
    """Without a means that is proven by a read-back a cut counts as programming to zero only."""
    assert replace(BENCH, cut_path=frozenset(means), read_backs=frozenset(back)).programming_only is alone


def test_stored_capacitance_and_fittings() -> None:
    """Output and cable add up; fittings are asked by name."""
    assert BENCH.stored_f == pytest.approx(1.5e-9)
    assert BENCH.has(Fitted.ARM_INPUT)
    assert not BENCH.has(Fitted.GROUND_SWITCH)


def test_settings_are_those_of_the_mapping() -> None:
    """The method and the function give the same."""
    assert BENCH.settings() == settings_of(BENCH)


def test_fitted_lines_enter_through_one_seam() -> None:
    """A fitted line replaces a monitor's; limits in codes follow, everything else stays."""
    line = Calibration(gain=0.77, zero=3.4, u_gain=1e-4, u_zero=0.5, source="calibration 7")
    fitted = BENCH.calibrated_with(voltage=line)
    assert fitted.voltage.monitor.source == "calibration 7"
    assert fitted.voltage.program == BENCH.voltage.program
    assert fitted.current == BENCH.current
    assert fitted.settings()["vzero"] == 3
    assert fitted.settings()["ov"] == int(24.8e3 / 0.77)
    assert BENCH.calibrated_with() == BENCH
