"""The program's own arithmetic."""

import pytest

from hvhost.plan.program import HoldStep, Program, RampStep, Retreat


@pytest.mark.parametrize(("fraction", "volts", "target"), [(0.2, None, 8e3), (1.0, None, 0.0), (None, 3e3, 7e3),
                                                           (None, 12e3, 0.0)])
def test_a_retreat_ends_below_the_breakdown_and_never_below_zero(fraction: float | None, volts: float | None,
                                                                 target: float) -> None:
    """From a breakdown at 10 kV."""
    retreat = Retreat(rest_s=1.0, back_fraction=fraction, back_v=volts, climb_v_per_s=1e3, series=3)
    assert retreat.target(10e3) == pytest.approx(target)


def test_holds_in_order() -> None:
    """Only holds, as the steps stand."""
    ramp = RampStep(number=0, name="r", place="f:1", to_v=1e3, slew_v_per_s=1e3, limit_a=1e-3)
    hold = HoldStep(number=1, name="h", place="f:2", v=1e3, limit_a=1e-3, hold_s=1.0, at_most_s=2.0, tolerance=0.01)
    program = Program(kind="plan", title="t", steps=(ramp, hold), v_highest=1e3, i_highest=1e-3, duration_s=3.0)
    assert list(program.holds()) == [hold]
