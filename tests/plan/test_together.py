"""What must fit together, beyond what the faulty files show."""

from collections.abc import Callable

from hvhost.plan.together import RETREAT_LATEST_S
from hvhost.words.findings import Finding


def test_a_parameter_whose_bounds_allow_both_is_left_to_the_sheet(faults_of: Callable[[str], tuple[Finding, ...]]
                                                                  ) -> None:
    """A reading at 60 s fits some hold times and not others: the plan is no fault by itself."""
    assert faults_of("plan: x\nparameters:\n  t: {quantity: duration, from: 30 s, to: 90 s}\nsteps:\n"
                     "- ramp: {to: 5 kV, rate: 1 kV/s}\n- hold: {for: t, at_most: 2 min, readings: [60 s]}\n") == ()


def test_checks_run_although_other_fields_are_at_fault(faults_of: Callable[[str], tuple[Finding, ...]]) -> None:
    """A wrong title and a wrong step do not hide a reference to nothing."""
    found = faults_of("plan: [x]\nsteps:\n- ramp: {to: nowhere, rate: 1 kV/s}\n- ramp: {to: 5 KV, rate: 1 kV/s}\n"
                      "- hold: {for: 60 s, at_most: 1 s}\n")
    assert [finding.line for finding in found] == [1, 3, 4, 5]


def test_the_retreat_leaves_before_the_pause_expires() -> None:
    """The MCU waits 30 s for the first segment after a rest; the plan uses less."""
    assert RETREAT_LATEST_S < 30.0
