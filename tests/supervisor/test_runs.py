"""How a run's outcome is settled, and its causes in words."""

import pytest

from hvhost.plan.compiler import direct_program
from hvhost.supervisor.runner import Runner
from hvhost.supervisor.runs import ActiveRun, Outcome, RunSpec, Stage, rule_word, told_causes
from hvhost.wire.vocabulary import Cause, HostRule
from tests.supervisor.lab import DEMO


def run_at(stage: Stage) -> ActiveRun:
    """A direct run at a stage."""
    program = direct_program(DEMO)
    spec = RunSpec(run_id="1", kind="direct", plan="", specimen="", operator="", tag=1, program=program, digest="")
    return ActiveRun(spec=spec, runner=Runner(program, DEMO, 10_000, 16), stage=stage)


@pytest.mark.parametrize(("first", "then", "stands"), [
    (Outcome.LOWERED, Outcome.FINISHED, Outcome.LOWERED),
    (Outcome.FINISHED, Outcome.TRIPPED, Outcome.TRIPPED),
    (Outcome.LOWERED, Outcome.TRIPPED, Outcome.TRIPPED),
    (Outcome.LOWERED, Outcome.CUT, Outcome.CUT),
    (Outcome.FINISHED, Outcome.CUT, Outcome.FINISHED),
    (Outcome.FINISHED, Outcome.INTERRUPTED, Outcome.INTERRUPTED),
    (Outcome.FAILED, Outcome.INTERRUPTED, Outcome.FAILED),
    (Outcome.INTERRUPTED, Outcome.TRIPPED, Outcome.INTERRUPTED),
    (Outcome.TRIPPED, Outcome.INTERRUPTED, Outcome.TRIPPED)])
def test_the_first_end_stands_but_what_happens_on_the_way_down_counts(first: Outcome, then: Outcome,
                                                                      stands: Outcome) -> None:
    """A plan that is complete and breaks down while it is lowered has tripped."""
    run = run_at(Stage.LIVE)
    run.end(first, "first")
    run.end(then, "then")
    assert run.outcome is stands


def test_a_link_lost_after_the_end_was_seen_changes_nothing() -> None:
    """The discharge alone was missed."""
    run = run_at(Stage.LIVE)
    run.end(Outcome.FINISHED, "the plan is complete")
    run.stage = Stage.DISCHARGING
    run.end(Outcome.INTERRUPTED, "unplugged")
    assert run.outcome is Outcome.FINISHED


def test_a_closed_run_is_closed() -> None:
    """Nothing that comes later touches its outcome."""
    run = run_at(Stage.LIVE)
    run.end(Outcome.FINISHED, "done")
    run.stage = Stage.CLOSED
    run.end(Outcome.TRIPPED, "later")
    assert (run.outcome, run.why) == (Outcome.FINISHED, "done")


def test_causes_are_told_in_words_with_the_hosts_rule() -> None:
    """A rule that this version does not know is told by its number."""
    assert told_causes(Cause.BREAKDOWN | Cause.HOST_RULE, HostRule.STALE) == ("breakdown", "host: stale")
    assert rule_word(999) == "rule 999"


@pytest.mark.parametrize("stage", list(Stage))
def test_a_run_is_open_while_armed_or_live(stage: Stage) -> None:
    """Only then may the MCU do anything on its behalf."""
    assert run_at(stage).open is (stage in (Stage.ARMED, Stage.LIVE))
