"""The walk through a program: steps, rests, series, and events that come late or twice."""

import pytest

from hvhost.plan.program import HoldClock, Pause, Retreat, WhenOut
from hvhost.supervisor.direct import SetPoint
from hvhost.supervisor.notes import Doing, What
from tests.supervisor.build import HZ, Walk, hold, program, ramp, rest
from tests.supervisor.lab import DEMO

PAUSE = Pause(count=10, rest_s=0.5, window_s=60.0)
RETREAT = Retreat(rest_s=1.0, back_fraction=0.5, climb_v_per_s=4e3, series=3)


def test_ramp_and_hold_end_by_themselves() -> None:
    """Begun, clocked, ended, finished; the last word is the hold's."""
    walk = Walk(program(ramp(4e3), hold(4e3, 1.0))).energise().pass_s(4.0)
    assert [note.step.name for note in walk.told(What.STEP_BEGUN) if note.step] == ["ramp 0", "hold 1"]
    assert len(walk.told(What.CLOCK_STARTED)) == 1
    assert walk.told(What.FINISHED)
    assert walk.words[0] == DEMO.voltage.program.code(4e3)
    assert walk.runner.doing is Doing.DONE


def test_a_rest_counts_from_zero_volts() -> None:
    """The way down is not rest."""
    walk = Walk(program(ramp(10e3), rest(1.0), ramp(1e3, 2))).energise()
    walk.pass_s(8.0)
    begun, ended = (next(n for n in walk.told(what) if n.step and n.step.name == "rest 1")
                    for what in (What.STEP_BEGUN, What.STEP_ENDED))
    assert (ended.tick - begun.tick) / HZ == pytest.approx(10.0 / 5.0 + 1.0, abs=0.1)


def test_no_more_is_ordered_than_the_queue_holds() -> None:
    """Segments wait for room."""
    walk = Walk(program(*(ramp(1e3 * (n % 2 + 1), n) for n in range(6))), queue=2)
    walk.runner.begin()
    assert len(walk.runner.orders()) <= 2


def test_a_started_event_that_was_lost_does_not_hold_the_plan() -> None:
    """'Queue dry' tells all that 'started' would have told."""
    runner = Walk(program(ramp(4e3), hold(4e3, 1.0))).runner
    runner.begin()
    orders = runner.orders()
    for serial, order in enumerate(orders, 1):
        runner.accepted(serial, order.stretch)
    runner.energised(0, 0)
    runner.ran_dry(len(orders), 10_000, 1_000)
    assert runner.doing is Doing.HOLDING
    runner.ran_dry(len(orders), 10_000, 1_000)
    assert runner.doing is Doing.HOLDING


def test_dry_before_its_answer_is_acted_on_when_the_answer_comes() -> None:
    """Event and answer may come in either order."""
    runner = Walk(program(ramp(4e3), hold(4e3, 1.0))).runner
    runner.begin()
    orders = runner.orders()
    runner.energised(0, 0)
    runner.ran_dry(len(orders), 10_000, 1_000)
    assert runner.doing is Doing.RAMPING
    for serial, order in enumerate(orders, 1):
        runner.accepted(serial, order.stretch)
    assert runner.doing is Doing.HOLDING


def test_answers_to_what_was_ordered_before_a_pause_count_no_more() -> None:
    """The pause emptied the queue; a late 'ok' changes no count."""
    walk = Walk(program(ramp(20e3, until_breakdown=True), pause=PAUSE, retreat=RETREAT))
    runner = walk.runner
    runner.begin()
    orders = runner.orders()
    runner.energised(0, 0)
    runner.paused(1, 5_000, 500)
    runner.accepted(1, orders[0].stretch)
    runner.not_taken(orders[-1].stretch)
    assert runner._ahead == 0


def test_the_retreat_climbs_from_below_the_breakdown_not_from_what_was_left() -> None:
    """Half of 8 kV, after a rest in which the readback fell to nothing; then the step goes on."""
    walk = Walk(program(ramp(20e3, until_breakdown=True), pause=PAUSE, retreat=RETREAT)).energise()
    walk.volts = 8e3
    walk.pass_s(0.5)
    walk.volts = 0.0
    walk.arc(1).pass_s(0.9)
    assert walk.runner.doing is Doing.PAUSED
    walk.pass_s(0.3)
    assert walk.runner.doing is Doing.RETREATING
    assert walk.told(What.RETREAT)[0].volts == pytest.approx(4e3)
    assert walk.arcs.count(1) == 1
    walk.pass_s(2.0)
    assert walk.runner.doing is Doing.RAMPING


def test_a_series_completes_a_ramp_until_breakdown_and_fails_any_other_step() -> None:
    """Three of three."""
    walk = Walk(program(ramp(20e3, until_breakdown=True), hold(1e3, 0.2), pause=PAUSE, retreat=RETREAT)).energise()
    for number in (1, 2, 3):
        walk.pass_s(3.0).arc(number)
    assert "series is complete" in walk.told(What.STEP_ENDED)[0].text
    walk.pass_s(4.0)
    assert walk.told(What.FINISHED)
    other = Walk(program(ramp(20e3), pause=PAUSE, retreat=RETREAT)).energise()
    for number in (1, 2, 3):
        other.pass_s(3.0).arc(number)
    assert "3 breakdowns" in other.told(What.FAILED)[0].text


def test_a_rest_behind_a_series_goes_on_inside_the_pause() -> None:
    """Nothing is sent for zero volts; the next step's first segment carries the arc."""
    walk = Walk(program(ramp(20e3, until_breakdown=True), rest(3.0), ramp(1e3, 2), pause=PAUSE)).energise()
    walk.pass_s(1.0).arc(1).pass_s(1.0)
    assert walk.runner.doing is Doing.RESTING
    assert walk.paused
    assert walk.runner.pause_left_s() == pytest.approx(2.5, abs=0.1)
    walk.pass_s(4.0)
    assert not walk.paused


def test_a_rest_longer_than_a_pause_may_last_leaves_it_at_zero_volts() -> None:
    """Before the pause expires one segment that changes nothing takes the bench out of it."""
    walk = Walk(program(ramp(20e3, until_breakdown=True), rest(40.0), pause=PAUSE)).energise()
    walk.pass_s(1.0).arc(1).pass_s(22.0)
    assert not walk.paused
    assert walk.words == (0, 0)
    assert walk.runner.doing is Doing.RESTING


def test_an_arc_breaks_a_continuous_hold() -> None:
    """It fails, or its clock begins anew, as the plan says; an accumulating clock goes on where it was."""
    series = Retreat(rest_s=0.5, back_fraction=0.5, climb_v_per_s=4e3, series=9)
    failing = Walk(program(ramp(4e3), hold(4e3, 5.0), pause=PAUSE, retreat=series)).energise().pass_s(3.0).arc(1)
    assert "interrupted by an arc" in failing.told(What.FAILED)[0].text
    restarting = Walk(program(ramp(4e3), hold(4e3, 5.0, when_out=WhenOut.RESTART), pause=PAUSE, retreat=series))
    restarting.energise().pass_s(3.0).arc(1).pass_s(3.5)
    assert restarting.told(What.CLOCK_RESTARTED)
    assert restarting.runner.elapsed_s < 2.0
    adding = Walk(program(ramp(4e3), hold(4e3, 5.0, clock=HoldClock.ACCUMULATE), pause=PAUSE, retreat=series))
    adding.energise().pass_s(3.0)
    before = adding.runner.elapsed_s
    adding.arc(1).pass_s(3.5)
    assert not adding.told(What.FAILED)
    assert before < adding.runner.elapsed_s < before + 2.5


def test_at_most_counts_pauses_too() -> None:
    """A hold that spends its time pausing ends when its longest time is over."""
    series = Retreat(rest_s=2.0, back_fraction=0.5, climb_v_per_s=4e3, series=9)
    walk = Walk(program(ramp(4e3), hold(4e3, 2.0, clock=HoldClock.ACCUMULATE, at_most_s=3.0), pause=PAUSE,
                        retreat=series)).energise().pass_s(2.0).arc(1)
    walk.pass_s(1.9)
    assert walk.runner.doing is Doing.PAUSED or walk.told(What.FAILED)
    walk.pass_s(1.0)
    assert "within at_most" in walk.told(What.FAILED)[0].text


def test_a_stopped_runner_orders_nothing_and_notes_nothing() -> None:
    """After the end of a run no clock runs on."""
    walk = Walk(program(ramp(4e3), hold(4e3, 1.0))).energise().pass_s(1.5)
    walk.runner.stop()
    walk.notes.clear()
    walk.volts = 0.0
    walk.pass_s(5.0)
    assert not walk.notes
    assert walk.runner.orders() == []


def test_a_direct_run_holds_where_it_was_set() -> None:
    """Ramp while it moves, hold when it stands, a new set-point from where the words are."""
    walk = Walk(program(kind="direct")).energise()
    assert walk.runner.doing is Doing.HOLDING
    walk.runner.head_for(SetPoint(volts=2e3, amps=1e-3, slew_v_per_s=1e3))
    walk.take()
    walk.pass_s(1.0)
    assert walk.runner.doing is Doing.RAMPING
    walk.pass_s(2.0)
    assert walk.runner.doing is Doing.HOLDING
    assert walk.words == (DEMO.voltage.program.code(2e3), DEMO.current.program.code(1e-3))
