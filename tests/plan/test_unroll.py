"""The walk: levels of a staircase, repeats, names, nominal times, tolerances."""

from collections.abc import Callable
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.plan.plan import Plan
from hvhost.plan.program import HoldStep, RampStep, RestStep
from hvhost.plan.unroll import Defaults, Unrolled, iec_tolerance, levels


def walk(plan: Plan, **values: float) -> Unrolled:
    """Unroll with a bench's defaults of 4 mA and 5 kV/s."""
    walked = Unrolled(plan, values, Defaults(limit_a=4e-3, slew_v_per_s=5e3))
    walked.walk(plan.steps)
    return walked


@pytest.mark.parametrize(("hold_s", "tolerance"), [(1.0, 0.01), (60.0, 0.01), (60.1, 0.03), (3600.0, 0.03)])
def test_tolerance_of_the_standard(hold_s: float, tolerance: float) -> None:
    """1 % up to and including 60 s, 3 % beyond (IEC 60060-1:2010, from memory)."""
    assert iec_tolerance(hold_s) == tolerance


def test_levels_end_at_the_top() -> None:
    """Equal steps, and a shorter last one where they do not divide the rise."""
    assert levels(1e3, 3e3, 1e3) == (1e3, 2e3, 3e3)
    assert levels(1e3, 3.5e3, 1e3) == (1e3, 2e3, 3e3, 3.5e3)
    assert levels(0.1, 0.3, 0.1) == (0.1, 0.2, 0.3)


@given(st.integers(1, 5000), st.integers(1, 5000), st.integers(1, 500))
def test_levels_rise_by_no_more_than_a_step(start: int, rise: int, step: int) -> None:
    """From start to end, each level above the one before and by a step at most, never a sliver of a step."""
    row = levels(start / 10, (start + rise) / 10, step / 10)
    assert row[-1] == (start + rise) / 10
    assert row[0] == start / 10 or len(row) == 1
    gaps = [high - low for low, high in pairwise(row)]
    assert all(1e-7 * step < gap <= step / 10 * (1 + 1e-5) for gap in gaps)


def test_staircase_is_ramps_and_holds(plan_of: Callable[..., Plan]) -> None:
    """Each level is reached by a ramp and held under the stairs' name with its number."""
    steps = walk(plan_of("- staircase: {name: s, from: 1 kV, to: 3 kV, step: 1 kV, for: 10 s, at_most: 20 s}"))
    named = steps.named_steps()
    assert [step.name for step in named] == ["s_ramp 1", "s 1", "s_ramp 2", "s 2", "s_ramp 3", "s 3"]
    assert [step.v for step in named if isinstance(step, HoldStep)] == [1e3, 2e3, 3e3]
    assert all(step.slew_v_per_s == 5e3 for step in named if isinstance(step, RampStep))


def test_repeat_writes_its_steps_out(plan_of: Callable[..., Plan]) -> None:
    """Three times two steps are six, numbered, at the same two lines."""
    walked = walk(plan_of("- repeat: {times: 3, steps: [{ramp: {to: 1 kV, rate: 1 kV/s}}, {rest: 5 s}]}"))
    named = walked.named_steps()
    assert [step.name for step in named] == ["ramp 1", "rest 1", "ramp 2", "rest 2", "ramp 3", "rest 3"]
    assert [step.number for step in named] == [0, 1, 2, 3, 4, 5]
    assert [step.duration_s for step in named if isinstance(step, RampStep)] == [1.0, 1.0, 1.0]
    assert isinstance(named[1], RestStep)


def test_a_ramp_by_duration_gets_its_rate(plan_of: Callable[..., Plan]) -> None:
    """From 5 kV to 2 kV in 10 s is 300 V/s."""
    walked = walk(plan_of("- ramp: {to: 5 kV, rate: 1 kV/s}\n- ramp: {to: 2 kV, duration: 10 s}"))
    ramp = walked.items[1].step
    assert isinstance(ramp, RampStep)
    assert (ramp.slew_v_per_s, ramp.duration_s) == (300.0, 10.0)


def test_readings_may_count_from_an_earlier_step(plan_of: Callable[..., Plan]) -> None:
    """The origin becomes the unrolled name of the nearest earlier step of that name."""
    walked = walk(plan_of("- ramp: {name: rise, to: 5 kV, duration: 10 s}\n"
                          "- hold: {for: 60 s, at_most: 70 s, readings: [10 s, 70 s], origin: rise}"))
    assert walked.findings == []
    hold = walked.named_steps()[1]
    assert isinstance(hold, HoldStep)
    assert (hold.origin, hold.readings_s) == ("rise", (10.0, 70.0))


def test_origin_in_a_repeat_is_the_step_of_the_same_round(plan_of: Callable[..., Plan]) -> None:
    """Round two counts from the second ramp."""
    walked = walk(plan_of("- repeat:\n    times: 2\n    steps:\n"
                          "      - ramp: {name: rise, to: 5 kV, rate: 1 kV/s}\n"
                          "      - hold: {for: 9 s, at_most: 10 s, readings: [6 s], origin: rise}\n"
                          "      - rest: 1 s"))
    origins = [step.origin for step in walked.named_steps() if isinstance(step, HoldStep)]
    assert origins == ["rise 1", "rise 2"]


def test_limits_of_a_step_stand_before_those_of_the_plan(plan_of: Callable[..., Plan]) -> None:
    """What a step states is its own; what it does not state comes from the plan's head."""
    walked = walk(plan_of("- ramp: {to: 5 kV, rate: 1 kV/s, limits: {trip: 1 mA}}",
                          "limits: {trip: 2 mA, overvoltage: 9 kV}\ncurrent_limit: 3 mA"))
    ramp = walked.items[0].step
    assert isinstance(ramp, RampStep)
    assert (ramp.limits.trip_a, ramp.limits.v_over, ramp.limit_a) == (1e-3, 9e3, 3e-3)


def test_a_filled_parameter_outside_a_bound_is_told(plan_of: Callable[..., Plan]) -> None:
    """A parameter may reach zero where a ramp may not hold it: told with the value and its name."""
    plan = plan_of("- ramp: {to: 5 kV, rate: r}", "parameters:\n  r: {quantity: voltage slew, from: 0 V/s, to: 9 V/s}")
    (finding,) = walk(plan, r=0.0).findings
    assert (finding.expected, finding.found) == ("more than 0 V/s", "0 V/s ('r')")
