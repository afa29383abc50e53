"""What forbids an arm, how strict it is made, and when a run closes."""

from dataclasses import replace

import pytest

from hvhost.plan.program import Program, StepLimits
from hvhost.supervisor.arming import interfering, obstacles, tighter
from hvhost.supervisor.runs import Outcome, Stage
from hvhost.supervisor.states import Permission
from hvhost.wire.vocabulary import Err
from hvhost.words.errors import CommandRefused
from tests.supervisor.build import hold, program, ramp
from tests.supervisor.lab import DEMO, Lab

LIMITS = StepLimits(trip_a=1e-3, level_a=0.5e-3, level_s=0.1, v_over=9e3)


def of(*steps: object) -> Program:
    """A program up to 8 kV and 2 mA."""
    return replace(program(*steps), v_highest=8e3, i_highest=2e-3)  # type: ignore[arg-type]


def test_nothing_is_asked_before_a_greeting(lab: Lab) -> None:
    """Every obstacle is named at once."""
    assert any(text.startswith("link:") for text in obstacles(lab.core))
    assert "no sample seen yet" in obstacles(lab.core)
    lab.ready()
    assert obstacles(lab.core) == []


def test_an_arm_is_as_tight_as_its_program(lab: Lab) -> None:
    """Ceilings, slew, limits: the least strict of the steps, rounded to the strict side, never above the settings."""
    lab.ready()
    given = tighter(lab.core, of(ramp(8e3, limits=LIMITS), hold(8e3, 1.0, limits=replace(LIMITS, trip_a=0.8e-3))))
    settings = DEMO.settings()
    assert given["vmax"] == DEMO.voltage.program.code(8e3)
    assert given["imax"] == DEMO.current.program.code(2e-3)
    amp, volt = DEMO.current.monitor.quantum, DEMO.voltage.monitor.quantum
    assert given["oc"] * amp <= 1e-3 < (given["oc"] + 1) * amp
    assert given["ov"] * volt <= 9e3 < (given["ov"] + 1) * volt
    assert given["oclms"] == 100
    assert given["vslew"] * DEMO.voltage.program.quantum == pytest.approx(4e3, rel=1e-3)
    assert all(value < settings[key] for key, value in given.items())


def test_a_limit_that_one_step_leaves_to_the_bench_is_not_tightened(lab: Lab) -> None:
    """The step without a limit needs the bench's."""
    lab.ready()
    given = tighter(lab.core, of(ramp(8e3, limits=LIMITS), hold(8e3, 1.0)))
    assert not {"oc", "ocl", "ov"} & given.keys()


def test_a_tightened_slew_lets_the_programs_own_segments_through(lab: Lab) -> None:
    """The MCU takes every segment of the plan that it was tightened for."""
    lab.energise()
    in_force = lab.board.mcu.core.settings
    assert in_force is not None
    assert in_force["vslew"] < DEMO.settings()["vslew"]
    assert lab.closed().outcome is Outcome.FINISHED
    assert lab.board.mcu.core.settings == DEMO.settings()


def test_a_refused_arm_leaves_the_run_prepared_and_says_why(lab: Lab) -> None:
    """It may be armed once the reason is gone; the old reason is forgotten then."""
    lab.ready().prepare()
    lab.core.arm_count += 3
    lab.ask("arm")
    lab.pass_s(0.2)
    assert lab.run.stage is Stage.PREPARED
    assert lab.run.why == f"arm refused: {Err.ARM}"
    lab.core.arm_count -= 3
    lab.arm()
    assert lab.run.why == ""


def test_an_armed_run_is_not_armed_again(lab: Lab) -> None:
    """One arm at a time."""
    lab.ready().prepare()
    lab.arm()
    with pytest.raises(CommandRefused, match="permission is requested"):
        lab.ask("arm")


def test_the_record_stays_open_until_the_voltage_is_told(lab: Lab) -> None:
    """Below the threshold, or as many bleed times as the bench asks where it cannot be told."""
    lab.energise().held()
    lab.fault("arc").until(lambda: lab.permission is Permission.IDLE, 1.0)
    at = lab.now_s
    lab.closed()
    assert lab.now_s - at == pytest.approx(DEMO.bleeds * DEMO.bleed_s, rel=0.1)
    assert lab.core.discharge.lost


def test_what_interfered_is_counted_by_rule(lab: Lab) -> None:
    """One raised sample trips nothing and is on the record."""
    lab.energise().held()
    lab.fault("i-spike").pass_s(0.3)
    assert lab.permission is Permission.HOLD
    assert interfering(lab.core).get("overcurrent") == 1
