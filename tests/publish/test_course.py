"""The course to come, from the program and the runner's position."""

from dataclasses import replace
from pathlib import Path

import pytest

from hvhost.bench.file import load_bench
from hvhost.bench.model import Bench
from hvhost.plan.program import HoldStep, Pause, Program, RampStep, RestStep, Retreat, Step
from hvhost.publish.course import Place, course_of, expected_s
from hvhost.publish.snapshot import COURSE_KEPT
from hvhost.supervisor.direct import SetPoint
from hvhost.supervisor.notes import Doing, Measured
from hvhost.supervisor.runner import Runner
from hvhost.supervisor.states import Permission

CONFIGS = Path(__file__).resolve().parents[2] / "configs"
HZ = 1000
RAMP = RampStep(number=0, name="rise", place="p:1", to_v=10e3, slew_v_per_s=1e3, limit_a=1e-3)
HOLD = HoldStep(number=1, name="keep", place="p:2", v=10e3, limit_a=1e-3, hold_s=60.0, at_most_s=90.0, tolerance=0.01)
REST = RestStep(number=2, name="rest", place="p:3", rest_s=20.0)


@pytest.fixture(scope="module")
def bench() -> Bench:
    """The demonstration's bench, with round slews."""
    return replace(load_bench(CONFIGS / "demo.bench.yaml"), slew_v_per_s=5e3, down_slew_v_per_s=2e3)


def runner_of(bench: Bench, *steps: Step, **changes: object) -> Runner:
    """A runner that has not begun."""
    program = Program(kind="plan", title="t", steps=steps, v_highest=10e3, i_highest=1e-3, duration_s=200.0)
    return Runner(replace(program, **changes), bench, HZ, 16)


def measured(volts: float, tick: int) -> Measured:
    """One block of 100 ms."""
    return Measured(index=tick, tick=tick, ticks=100, pairs=100, volts=volts, amps=0.0, volts_max=volts)


def test_before_the_press_the_whole_plan_lies_ahead(bench: Bench) -> None:
    """Ramp, hold, fall at the bench's down-slew, rest: hand-computed corners."""
    course = course_of(runner_of(bench, RAMP, HOLD, REST), Permission.WARNING, 100.0, 0.0, starts_s=3.0)
    assert course == ((100.0, 0.0), (103.0, 0.0), (113.0, 10e3), (173.0, 10e3), (178.0, 0.0), (198.0, 0.0))
    assert expected_s(course, 100.0) == pytest.approx(98.0)


def test_from_the_midst_of_a_ramp_it_goes_on_from_the_set_point(bench: Bench) -> None:
    """At 4 kV of 10 kV six seconds are left of the ramp."""
    runner = runner_of(bench, RAMP, HOLD)
    runner.doing = Doing.RAMPING
    assert course_of(runner, Permission.RAMP, 50.0, 4e3)[:3] == ((50.0, 4e3), (56.0, 10e3), (116.0, 10e3))


def test_of_a_hold_what_the_clock_has_not_counted_is_left(bench: Bench) -> None:
    """The clock is the plan's: what it has counted is over, and a clock that stands shifts the end."""
    runner = runner_of(bench, HOLD)
    runner.begin()
    runner.orders()
    runner.energised(0, 0)
    for tick in range(0, 21_000, 100):
        runner.block(measured(10e3, tick))
    counted = runner.elapsed_s
    assert 19.0 < counted <= 21.0
    course = course_of(runner, Permission.HOLD, 0.0, 10e3)
    assert course[1].t_s == pytest.approx(60.0 - counted, abs=0.01)
    assert course[2] == (pytest.approx(65.0 - counted, abs=0.01), 0.0)


def test_a_rest_lasts_what_is_left_of_it(bench: Bench) -> None:
    """At zero volts, 15 of 20 s over."""
    runner = runner_of(bench, REST, RAMP)
    runner.doing = Doing.RESTING
    course = course_of(runner, Permission.REST, 0.0, 0.0, rested_s=15.0)
    assert course == ((0.0, 0.0), (5.0, 0.0), (15.0, 10e3), (20.0, 0.0))


def test_a_pause_is_followed_by_the_climb_and_the_rest_of_the_step(bench: Bench) -> None:
    """After an arc at 8 kV with a retreat to 80 %: rest, climb to 6.4 kV at its slew, on at the ramp's."""
    retreat = Retreat(rest_s=5.0, back_fraction=0.2, climb_v_per_s=3.2e3, series=3)
    runner = runner_of(bench, RAMP, reaction=Pause(count=5, rest_s=5.0, window_s=60.0), retreat=retreat)
    runner.begin()
    runner.orders()
    runner.energised(0, 0)
    runner.block(measured(8e3, 0))
    runner.paused(1, 100, 100)
    course = course_of(runner, Permission.PAUSING, 0.0, 0.0)
    assert course[1] == (pytest.approx(5.0, abs=0.01), 0.0)
    assert course[2] == (pytest.approx(7.0, abs=0.01), pytest.approx(6.4e3))
    assert course[3] == (pytest.approx(10.6, abs=0.01), pytest.approx(10e3))


def test_lowering_leads_to_zero_and_nothing_after_it(bench: Bench) -> None:
    """At the bench's down-slew, whatever the plan had still to come."""
    assert course_of(runner_of(bench, RAMP, HOLD), Permission.LOWERING, 7.0, 6e3) == ((7.0, 6e3), (10.0, 0.0))


def test_a_direct_run_heads_for_its_set_point(bench: Bench) -> None:
    """By hand there is no plan: the way to the set-point is all that is known."""
    runner = runner_of(bench, kind="direct")
    assert course_of(runner, Permission.HOLD, 0.0, 1e3) == ()
    runner.head_for(SetPoint(volts=3e3, amps=1e-3, slew_v_per_s=500.0))
    assert course_of(runner, Permission.RAMP, 0.0, 1e3) == ((0.0, 1e3), (4.0, 3e3))


def test_a_run_that_is_done_has_nothing_to_come(bench: Bench) -> None:
    """After its last step a run has no course."""
    runner = runner_of(bench, RAMP)
    runner.stop()
    assert course_of(runner, Permission.RAMP, 0.0, 1e3) == ()
    assert expected_s((), 0.0) is None


def test_a_long_plan_is_bounded_and_claims_no_end(bench: Bench) -> None:
    """A thousand steps give so many corners, and then the end is not known."""
    steps = tuple(replace(RAMP, number=n, to_v=1e3 * (n % 9 + 1)) for n in range(1000))
    course = course_of(runner_of(bench, *steps), Permission.WARNING, 0.0, 0.0)
    assert len(course) == COURSE_KEPT
    assert expected_s(course, 0.0) is None


def test_the_place_counts_from_the_step_and_from_the_rest() -> None:
    """A new step begins anew; a rest counts from when zero volts stand."""
    place = Place()
    place.look(0, False, 1000)
    place.look(0, False, 3000)
    assert (place.step_s(HZ), place.rested_s(HZ)) == (2.0, 0.0)
    place.look(1, False, 4000)
    place.look(1, True, 5000)
    place.look(1, True, 7500)
    assert (place.step_s(HZ), place.rested_s(HZ)) == (3.5, 2.5)
