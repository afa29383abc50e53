"""The second table at work: what must hold however one arrived."""

from dataclasses import replace

from hvhost.supervisor import settling
from hvhost.supervisor.runs import Outcome
from hvhost.supervisor.states import SEAT_EMPTY_MAX_S, LinkState, Permission, Voltage
from tests.supervisor.lab import Lab


def test_a_table_that_asks_for_nothing_is_not_asked_again(lab: Lab) -> None:
    """What the rows look at is remembered, so a quiet block costs one comparison."""
    settling.settle(lab.core, lab.now_s)
    before = lab.core.settled
    settling.settle(lab.core, lab.now_s)
    assert lab.core.settled == before


def test_a_lost_link_makes_the_voltage_unknown_and_ends_the_run_as_interrupted(lab: Lab) -> None:
    """Both follow from the state alone, whoever set it."""
    core = lab.energise().held().core
    run = core.run
    assert run is not None
    core.state = replace(core.state, link=LinkState.LOST)
    settling.settle(core, lab.now_s)
    assert core.state.permission is Permission.IDLE
    assert core.state.voltage is Voltage.UNKNOWN
    assert run.outcome is Outcome.INTERRUPTED


def test_a_failed_recorder_lowers_what_runs(lab: Lab) -> None:
    """The run ends safely and says why."""
    core = lab.energise().held().core
    core.recorder_ready = False
    settling.settle(core, lab.now_s)
    assert core.link_stopping
    assert core.run is not None
    assert core.run.outcome is Outcome.RECORD_FAILED


def test_the_facts_tell_for_how_long_nobody_has_had_control(lab: Lab) -> None:
    """Counted from the release on the host's monotonic clock."""
    core = lab.core
    core.seat.holder, core.seat.empty_since_s = None, lab.now_s
    facts = settling.facts_of(core, lab.now_s + SEAT_EMPTY_MAX_S)
    assert facts.seat_empty_s == SEAT_EMPTY_MAX_S
    assert not facts.run_open
