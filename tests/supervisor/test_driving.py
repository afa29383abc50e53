"""Segments to the wire and answers back."""

import pytest

from hvhost.guard.limits import limits_of
from hvhost.supervisor.driving import step_text
from hvhost.supervisor.runs import Outcome
from hvhost.supervisor.states import Permission
from hvhost.wire.vocabulary import McuState
from tests.supervisor.lab import Lab, plan_of

LIMITED = """\
  - ramp: {to: 4 kV, rate: 4 kV/s, limits: {trip: 1 mA}}
  - hold: {name: level, for: 2 s, at_most: 8 s, window: 200 ms}
"""


def test_nothing_is_ordered_before_the_warning(lab: Lab) -> None:
    """Requested and proving queue nothing."""
    lab.ready().prepare()
    lab.arm().press().until(lambda: lab.permission is Permission.WARNING, 3.0)
    assert not any(b"seg " in data for t_s, data in lab.sent if t_s < lab.now_s - 0.002)
    lab.pass_s(0.1)
    assert any(b"seg " in data for _, data in lab.sent)


def test_each_step_is_judged_by_its_own_limits_and_the_bench_by_its_own_afterwards(lab: Lab) -> None:
    """Tighter in the step that says so; the bench's again when the output is off."""
    lab.energise(plan_of(LIMITED)).pass_s(0.1)
    assert lab.core.guard is not None
    own = limits_of(lab.bench, None, None, rate_hz=1000.0)
    assert lab.core.guard.limits.overcurrent < own.overcurrent
    lab.held()
    assert lab.core.guard.limits.overcurrent == own.overcurrent
    lab.closed()
    assert lab.core.guard.limits == own


def test_a_segment_that_the_mcu_refuses_ends_the_run_by_a_lower(lab: Lab) -> None:
    """Failed, with the MCU's code, and lowered."""
    lab.energise(plan_of(LIMITED)).until(lambda: lab.v_true() > 1000.0)
    mcu = lab.board.mcu.core
    assert mcu.settings is not None
    mcu.adopt(mcu.settings.with_(vmax=100))
    lab.run.runner._load(lab.run.spec.program.steps[1])
    lab.run.runner.words = (0, 0)
    lab.run.runner._load(lab.run.spec.program.steps[0])
    run = lab.closed()
    assert run.outcome is Outcome.FAILED
    assert "the MCU refused a segment" in run.why
    assert any(line["mcu"] == McuState.LOWERING for line in lab.states())


def test_a_segment_that_is_never_answered_ends_the_run(lab: Lab) -> None:
    """Four tries in a second, then failed and lowered."""
    lab.energise(plan_of()).until(lambda: lab.v_true() > 1000.0)
    lab.tap = lambda line: b"" if b" seg " in line and line.startswith(b"ok") else line
    lab.run.runner.words = (1000, lab.run.runner.words[1])
    lab.run.runner._load(lab.run.spec.program.steps[0])
    lab.until(lambda: lab.run.ended, 5.0)
    assert lab.run.outcome is Outcome.FAILED
    assert "did not answer a segment" in lab.run.why


def test_an_operators_lower_is_not_called_a_failed_hold(lab: Lab) -> None:
    """On the way down no clock fails and no step ends."""
    lab.energise().held()
    lab.ask("lower")
    lab.closed()
    assert lab.run.outcome is Outcome.LOWERED
    assert not lab.said("outside")


def test_what_a_run_does_is_told_with_units(lab: Lab) -> None:
    """A line for the screen."""
    lab.ready().prepare()
    assert step_text(lab.run) == "ramp to 4 kV at 4 kV/s"
    lab.run.runner.at = 1
    assert step_text(lab.run) == "hold 4 kV for 2 s"
    lab.run.runner.at = 2
    assert step_text(lab.run) == ""


def test_readings_are_noted_at_their_times(lab: Lab) -> None:
    """One reading, one second after the clock's start."""
    lab.energise()
    lab.closed()
    assert sum("reading at 1 s" in line for line in lab.lines()) == 1


@pytest.mark.parametrize("fault", ["lead-off", "panel-v"])
def test_a_hold_that_is_never_reached_fails(lab: Lab, fault: str) -> None:
    """Held down by the front panel: at_most ends it; a lead that is off does not hinder the voltage."""
    lab.fault(fault, 3e3 if fault == "panel-v" else None).energise()
    run = lab.closed(40.0)
    assert run.outcome is (Outcome.FAILED if fault == "panel-v" else Outcome.FINISHED)
