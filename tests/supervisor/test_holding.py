"""The clock of a hold (IEC 60060-1: the duration counts while the mean is inside the tolerance)."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.plan.program import HoldClock, HoldStep, WhenOut
from hvhost.supervisor.holding import ADD_ANEW, Holding
from hvhost.supervisor.notes import Measured, Note, What
from tests.supervisor.build import BLOCK, HZ, hold

BLOCK_S = BLOCK / HZ


class Clock:
    """A hold fed block by block."""

    def __init__(self, step: HoldStep) -> None:
        self.notes: list[Note] = []
        self.holding, self.step, self.at = Holding(HZ, self.notes), step, 0
        self.holding.begin(step)
        self.origins = {"ramp start": 0}
        self.done, self.failed = False, ""

    def see(self, volts: float, seconds: float) -> "Clock":
        """Blocks of this mean, until the hold is over."""
        for _ in range(round(seconds / BLOCK_S)):
            if self.done or self.failed:
                break
            measured = Measured(index=self.at * 32, tick=self.at * BLOCK, ticks=BLOCK, pairs=32, volts=volts,
                                amps=2e-6, volts_max=volts)
            self.holding.observe(measured, self.step)
            self.done, self.failed = self.holding.take(self.step, measured, self.origins)
            self.at += 1
        return self

    def told(self, what: What) -> list[Note]:
        """The notes of a kind."""
        return [note for note in self.notes if note.what is what]


def test_the_clock_starts_when_the_mean_enters_and_ends_the_hold() -> None:
    """Not at the step's beginning."""
    clock = Clock(hold(1000.0, 1.0)).see(900.0, 2.0)
    assert clock.holding.elapsed_s == 0.0
    clock.see(1000.0, 1.0)
    assert not clock.done
    clock.see(1000.0, 0.3)
    assert clock.done


def test_one_peak_inside_the_window_breaks_nothing_and_a_dip_that_lasts_fails() -> None:
    """The mean over the window counts, not a block."""
    clock = Clock(hold(1000.0, 5.0, window_s=1.0)).see(1000.0, 2.0).see(1100.0, BLOCK_S).see(1000.0, 1.0)
    assert not clock.failed
    clock.see(900.0, 1.0)
    assert "outside 1 %" in clock.failed
    assert "plan:2" in clock.failed


def test_a_restarting_clock_begins_anew_with_its_readings() -> None:
    """Out and in again: the whole time once more, the readings too."""
    clock = Clock(hold(1000.0, 1.0, when_out=WhenOut.RESTART, readings_s=(0.5,)))
    clock.see(1000.0, 0.8).see(900.0, 0.5).see(1000.0, 3.0)
    assert clock.done
    assert len(clock.told(What.READING)) == 2
    assert len(clock.told(What.CLOCK_STARTED)) == 2
    assert clock.holding.restarts == 1


def test_an_accumulating_clock_adds_what_is_inside() -> None:
    """Half a second in, one out, half in: over."""
    clock = Clock(hold(1000.0, 1.0, clock=HoldClock.ACCUMULATE)).see(1000.0, 0.7).see(800.0, 1.0)
    assert 0.4 < clock.holding.elapsed_s < 0.8
    clock.see(1000.0, 0.9)
    assert clock.done


def test_readings_are_taken_at_their_times_from_their_origin() -> None:
    """From the clock's start, or from a named one; the hold waits for the last."""
    clock = Clock(hold(1000.0, 0.5, readings_s=(0.2, 1.0))).see(1000.0, 5.0)
    assert [n.reading_s for n in clock.told(What.READING)] == [0.2, 1.0]
    assert clock.at * BLOCK_S < 1.3
    other = Clock(hold(1000.0, 0.5, readings_s=(3.0,), origin="ramp start")).see(1000.0, 2.0)
    assert not other.done
    assert other.holding.next_reading_s(other.step, other.at * BLOCK, other.origins) is not None
    assert other.see(1000.0, 2.0).done
    never = Clock(hold(1000.0, 0.5, readings_s=(3.0,), origin="no such step"))
    assert never.holding.next_reading_s(never.step, 0, never.origins) is None


def test_an_arc_fails_restarts_or_leaves_it_alone() -> None:
    """As the plan says; before the clock has started there is nothing to break."""
    assert Clock(hold(1000.0, 5.0)).holding.interrupted(hold(1000.0, 5.0), 0, 0) == ""
    clock = Clock(hold(1000.0, 5.0)).see(1000.0, 1.0)
    assert "interrupted by an arc" in clock.holding.interrupted(clock.step, clock.at, 0)
    adding = Clock(hold(1000.0, 5.0, clock=HoldClock.ACCUMULATE)).see(1000.0, 1.0)
    assert adding.holding.interrupted(adding.step, adding.at, 0) == ""


@given(st.lists(st.sampled_from([900.0, 1000.0]), min_size=1, max_size=60), st.sampled_from(list(HoldClock)))
def test_the_clock_never_shows_more_than_the_time_that_passed(volts: list[float], clock_kind: HoldClock) -> None:
    """Whatever the voltage does."""
    clock = Clock(hold(1000.0, 100.0, clock=clock_kind, when_out=WhenOut.RESTART))
    for value in volts:
        clock.see(value, BLOCK_S)
        assert 0.0 <= clock.holding.elapsed_s <= clock.at * BLOCK_S


def test_the_peak_is_that_of_the_last_blocks() -> None:
    """What stood before a collapse, not what stood a second ago."""
    clock = Clock(hold(1000.0, 50.0, window_s=2.0, when_out=WhenOut.RESTART)).see(1500.0, 0.5).see(1000.0, 1.0)
    assert clock.holding.peak_v == 1000.0


def test_running_totals_equal_the_whole_window_added_anew() -> None:
    """Over thousands of blocks of changing size the mean is that of the window, to rounding."""
    holding = Holding(HZ, [])
    step = hold(1000.0, 1e6)
    for k in range(3 * ADD_ANEW + 7):
        pairs = 8 + k % 25
        holding.observe(Measured(index=k, tick=k * 320, ticks=320, pairs=pairs, volts=1000.0 + k % 7 * 0.1,
                                 amps=1e-6 * (k % 11), volts_max=1001.0), step)
        if k % 500 == 0:
            assert holding._total_pairs == sum(holding._pairs)
            assert holding._total_volts == pytest.approx(sum(holding._volts), rel=1e-12)
            assert holding._total_amps == pytest.approx(sum(holding._amps), rel=1e-9, abs=1e-15)
