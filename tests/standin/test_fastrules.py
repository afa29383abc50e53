"""The fast rules: what trips, how soon, what must not trip, and what is only counted."""

import pytest

from hvhost.wire.vocabulary import Cause, Inputs, McuState
from tests.standin.fakes import SETTINGS, Bench


def reaction_samples(bench: Bench, limit: int = 50) -> int:
    """Samples from now until the output is off."""
    for n in range(1, limit):
        bench.pass_ms(1)
        if bench.state is not McuState.ENERGISED:
            return n
    raise AssertionError(f"still energised after {limit} samples")


@pytest.mark.parametrize("persist", [1, 2, 3, 4])
@pytest.mark.parametrize(("v", "i", "cause"), [
    (None, 20_001, Cause.OVERCURRENT), (31_001, None, Cause.OVERVOLTAGE | Cause.ABOVE_ENVELOPE),
    (11_002, None, Cause.ABOVE_ENVELOPE), (8_999, None, Cause.BREAKDOWN), (0, None, Cause.BREAKDOWN)])
def test_a_rule_acts_at_the_nth_sample_that_meets_it(persist, v, i, cause):
    """One sample period for persistence 1, one more for each further n (PROTOCOL 10.1, 10.2)."""
    bench = Bench(SETTINGS.with_(persist=persist)).energised()
    bench.board.v, bench.board.i = v, i
    assert reaction_samples(bench) == persist
    assert bench.dead
    assert bench.mcu.latched == cause


@pytest.mark.parametrize(("v", "i"), [(None, 20_000), (10_999, None), (9_001, None)])
def test_at_its_limit_a_rule_does_not_act(v, i):
    """Limits are 'more than' (PROTOCOL 10.3, 10.5, 10.8)."""
    bench = Bench(SETTINGS.with_(ocl=20_000)).energised()
    bench.board.v, bench.board.i = v, i
    bench.pass_ms(50)
    assert bench.state is McuState.ENERGISED


@pytest.mark.parametrize(("v", "i", "cause"), [(None, 30_000, Cause.OVERCURRENT), (32_000, None, Cause.OVERVOLTAGE),
                                               (0, None, Cause.BREAKDOWN)])
def test_one_interfering_sample_is_counted_not_acted_on(v, i, cause):
    """A single sample beyond a limit is an event with a count (PROTOCOL 10.2)."""
    bench = Bench().energised()
    for _ in range(3):
        bench.board.v, bench.board.i = v, i
        bench.pass_ms(1)
        bench.board.v = bench.board.i = None
        bench.pass_ms(120)
    assert bench.state is McuState.ENERGISED
    told = [event for event in bench.events if event.kind == "interfered" and event.a == cause]
    assert [event.b for event in told] == [1, 2, 3]


def test_overcurrent_level_needs_its_time():
    """Above the level for `oclms`; one sample below starts anew (PROTOCOL 10.4)."""
    bench = Bench().energised()
    bench.board.i = 15_001
    bench.pass_ms(99)
    bench.board.i = 15_000
    bench.pass_ms(1)
    bench.board.i = 15_001
    bench.pass_ms(99)
    assert bench.state is McuState.ENERGISED
    bench.pass_ms(1)
    assert bench.mcu.latched == Cause.OVERCURRENT_LEVEL


def test_a_fall_that_the_words_explain_is_no_breakdown():
    """A steep ramp down, followed late by the readback, trips nothing (PROTOCOL 10.5)."""
    bench = Bench(SETTINGS.with_(vslew=0xFFFFFFFF, env=20_000)).energised()
    bench.board.tau_s = 0.002
    assert bench.seg(2_000, ticks=100) == ""
    bench.pass_ms(50)
    assert bench.state is McuState.ENERGISED
    assert bench.board.level < 1_100


def test_a_steep_ramp_up_trips_nothing():
    """Set-point steps and their charging current within limits are no fault."""
    bench = Bench(SETTINGS.with_(vslew=0xFFFFFFFF, islew=0xFFFFFFFF)).energised(v=0)
    bench.board.i = 14_000
    assert bench.seg(50_000, ticks=50) == ""
    bench.pass_ms(50)
    assert bench.state is McuState.ENERGISED


def test_a_readback_that_only_fails_to_fall_is_slow_not_a_trip():
    """A charged load that bleeds slower than the envelope is told once (PROTOCOL 10.9)."""
    bench = Bench(SETTINGS.with_(bleed=100)).energised()
    bench.board.tau_s = 20.0
    assert bench.seg(1_000, ticks=10_000) == ""
    bench.pass_ms(3_000)
    assert bench.state is McuState.ENERGISED
    assert bench.kinds().count("slow") == 1
    bench.board.v = round(bench.board.level) + 1_100
    bench.pass_ms(5)
    assert bench.mcu.latched == Cause.ABOVE_ENVELOPE


def test_a_voltage_in_the_warning_trips():
    """With the inhibit asserted there is nothing to read (PROTOCOL 10.1)."""
    bench = Bench().warned()
    bench.board.v = 1_100
    bench.pass_ms(5)
    assert bench.dead
    assert bench.mcu.latched == Cause.ABOVE_ENVELOPE


def test_rules_stay_live_while_lowering():
    """A collapse or overcurrent during a lower is a cut, relay included (PROTOCOL 9.8, 11.6)."""
    for v, i, cause in ((0, None, Cause.BREAKDOWN), (None, 25_000, Cause.OVERCURRENT)):
        bench = Bench().energised(pause=(3, 500, 10_000))
        bench.lower()
        bench.pass_ms(50)
        bench.board.v, bench.board.i = v, i
        bench.pass_ms(3)
        assert bench.dead
        assert bench.mcu.latched == cause


def test_a_readback_that_stands_still_is_missing_only_above_five_percent():
    """Stuck for `missms` while the word is above 5 % of its ceiling (PROTOCOL 10.11)."""
    bench = Bench().energised(v=3_000)
    bench.board.v = 1_500
    bench.pass_ms(2_000)
    assert bench.state is McuState.ENERGISED
    bench.seg(3_200, ticks=1_000)
    bench.pass_ms(450)
    assert bench.state is McuState.ENERGISED
    bench.pass_ms(250)
    assert bench.mcu.latched == Cause.READBACK_MISSING


def test_a_readback_at_the_converters_limit_is_missing():
    """A code at its end, even one that flickers there, says nothing (PROTOCOL 10.11)."""
    bench = Bench(SETTINGS.with_(ov=65_535, env=65_535)).energised()
    bench.board.v = 32_767
    bench.pass_ms(495)
    assert bench.state is McuState.ENERGISED
    bench.pass_ms(20)
    assert bench.mcu.latched == Cause.READBACK_MISSING


def test_the_longest_time_on_ends_in_a_latched_cut():
    """Counted from the release of the inhibit (PROTOCOL 10.12)."""
    bench = Bench(SETTINGS.with_(longest=2)).energised(v=0)
    bench.pass_ms(1_999)
    assert bench.state is McuState.ENERGISED
    bench.pass_ms(2)
    assert bench.mcu.latched == Cause.LONGEST_ON


def test_with_the_output_off_collapse_and_overcurrent_are_events():
    """Grounding after a run is no breakdown (PROTOCOL 10.16)."""
    bench = Bench().energised()
    bench.cut()
    bench.pass_ms(20)
    bench.board.level, bench.board.i = 0.0, 25_000
    bench.pass_ms(10)
    bench.board.i = None
    bench.pass_ms(10)
    assert {event.a for event in bench.events if event.kind == "offseen"} == {Cause.BREAKDOWN, Cause.OVERCURRENT}
    assert bench.kinds().count("offseen") == 2
    assert not bench.mcu.latched


def test_a_readback_at_its_limit_with_the_output_off_is_an_event():
    """A monitor that reads full scale with the output off is told once (PROTOCOL 10.16)."""
    bench = Bench()
    bench.board.v = 32_767
    bench.pass_ms(1_000)
    assert [event.a for event in bench.events if event.kind == "offseen"] == [Cause.READBACK_MISSING]
    assert not bench.mcu.latched


@pytest.mark.parametrize(("vmap", "vzero"), [(-32_768, 0), (32_768, 100), (-32_768, -50)])
def test_rules_judge_oriented_codes(vmap, vzero):
    """Sign and zero of the monitor are taken out before any limit (PROTOCOL 1.5)."""
    bench = Bench(SETTINGS.with_(vmap=vmap, vzero=vzero), clear=False)
    sign = 1 if vmap > 0 else -1
    level = bench.board.sample

    def sample() -> tuple[int, int]:
        v, i = level()
        return sign * v + vzero, i

    bench.board.sample = sample
    bench.pass_ms(300)
    bench.ask("reset", f"{bench.causes:08X} 0")
    bench.energised()
    assert abs(bench.mcu.core.v - 10_000) <= 1
    bench.board.v = 0
    bench.pass_ms(5)
    assert bench.mcu.latched == Cause.BREAKDOWN


def test_several_rules_at_one_sample_latch_together_with_one_cut():
    """The set of causes is whole, the cut is one."""
    bench = Bench().energised()
    bench.board.i, bench.board.v = 25_000, 0
    bench.pass_ms(3)
    assert bench.mcu.latched == Cause.OVERCURRENT | Cause.BREAKDOWN
    assert bench.kinds().count("cut") == 1
    bench.board.open(Inputs.POLARITY)
    assert bench.dead
