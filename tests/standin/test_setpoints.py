"""Segments: accepted whole or not at all, exact to the bit, and a lower that nothing stops."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.standin.core import Timer
from hvhost.wire.vocabulary import CutWhy, McuState
from tests.standin.fakes import SETTINGS, Bench


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 60000), st.integers(0, 60000), st.integers(1, 20_000))
def test_every_word_is_within_one_code_and_the_last_is_the_target(v, i, ticks):
    """Interpolated words stay within one code of the exact line and end at the target (PROTOCOL 6.6)."""
    bench = Bench(SETTINGS.with_(vslew=0xFFFFFFFF, islew=0xFFFFFFFF, drop=65535, env=65535)).energised(v=0)
    core = bench.mcu.core
    began = bench.tick
    assert bench.seg(v, i, ticks) == ""
    for k in sorted({1, ticks // 3, ticks // 2, ticks - 1, ticks} - {0}):
        bench.pass_ms((began + k - bench.tick) / 10)
        assert bench.tick == began + k
        assert abs(core.v_word - v * k / ticks) < 1
        assert abs(core.i_word - i * k / ticks) < 1
    assert (core.v_word, core.i_word) == (v, i)


def test_ten_codes_in_ten_hours_move_by_single_codes():
    """The slowest ramp of all still ends at its target (ten codes in ten hours)."""
    bench = Bench(SETTINGS.with_(longest=100_000)).energised(v=0)
    core = bench.mcu.core
    ticks = 36_000 * 10_000
    assert bench.seg(10, 10, ticks) == ""
    began = core.now
    words = []
    for part in range(21):
        core.now = began + ticks * part // 20  # the arithmetic alone: no need to live through ten hours
        core.points.move()
        words.append(core.v_word)
    assert words == [part // 2 for part in range(21)]


@pytest.mark.parametrize(("v", "i", "ticks", "code"), [
    (60001, 0, 20_000, "ceiling"), (0, 60001, 20_000, "ceiling"), (20000, 0, 0, "range"),
    (6001, 0, 1_000, "slew"), (0, 60000, 999, "slew"), (6000, 0, 1_000, "")])
def test_a_segment_beyond_a_ceiling_is_refused_whole(v, i, ticks, code):
    """Ceilings of word and slew are the MCU's own; a refused segment leaves nothing behind (PROTOCOL 6.3)."""
    bench = Bench().energised(v=0)
    assert bench.seg(v, i, ticks) == code
    bench.pass_ms(10)
    assert (bench.mcu.v_word > 0) is (code == "")


def test_a_full_queue_refuses():
    """Beyond its depth the queue takes nothing; the running segment does not count."""
    bench = Bench().energised(v=0)
    assert [bench.seg(100, ticks=10_000) for _ in range(6)] == [""] * 5 + ["queue"]


def test_segments_follow_each_other_without_a_gap_and_then_hold():
    """The next segment starts at the tick at which one ends; a dry queue is the event `hold` (PROTOCOL 6.8, 6.10)."""
    bench = Bench().energised(v=0)
    bench.seg(1000, ticks=1_003)
    bench.seg(500, ticks=777)
    bench.pass_ms(300)
    starts = [event.tick for event in bench.events if event.kind == "segment"]
    assert starts[1] - starts[0] == 1_003
    assert bench.event("hold").tick - starts[1] == 777
    assert bench.mcu.v_word == 500


def test_serials_count_from_one_in_each_arm():
    """The serial number tells which segment of this arm it is (PROTOCOL 6.2)."""
    bench = Bench().energised(v=0)
    bench.seg(100)
    assert bench.last().words == ("1", "0")
    bench.cut()
    bench.pass_ms(400)
    bench.energised(v=0)
    bench.seg(100)
    assert bench.last().words == ("1", "0")


def test_a_segment_queued_in_the_warning_starts_at_the_tick_of_energising():
    """Words are zero all through the warning, then the queued segment starts with the release (PROTOCOL 5.15, 5.16)."""
    bench = Bench().warned()
    assert bench.seg(20000) == ""
    while bench.state is McuState.WARNING:
        assert bench.mcu.v_word == 0
        assert bench.board.inhibit
        bench.pass_ms(10)
    assert bench.event("segment").tick == bench.event("energised").tick


def test_a_lower_ramps_at_its_own_slew_and_cuts_at_zero():
    """20000 codes at 20000 codes/s take one second, then the relay drops (PROTOCOL 7.12, 7.13)."""
    bench = Bench().energised()
    bench.lower()
    bench.pass_ms(500)
    assert bench.state is McuState.LOWERING
    assert bench.mcu.v_word == 10000
    bench.pass_ms(501)
    assert bench.dead
    assert bench.event("cut").a == CutWhy.LOWERED
    assert bench.event("cut").tick - bench.event("lowering").tick == 10_000
    assert not bench.mcu.latched


def test_a_lower_too_slow_for_its_time_ends_in_the_cut():
    """After `lowermax` the lower is cut wherever it is (PROTOCOL 7.13)."""
    bench = Bench(SETTINGS.with_(downslew=100, lowermax=700)).energised()
    bench.lower()
    bench.pass_ms(699)
    assert bench.state is McuState.LOWERING
    bench.pass_ms(2)
    assert bench.dead
    assert bench.event("cut").a == CutWhy.LOWER_MAX


def test_nothing_but_a_cut_stops_a_lower():
    """Segments are refused, a second lower and renewals change nothing (PROTOCOL 7.14)."""
    bench = Bench().energised()
    bench.lower()
    bench.pass_ms(100)
    assert bench.seg(30000) == "state"
    began = bench.event("lowering").tick
    bench.lower()
    bench.pass_ms(100)
    assert bench.event("lowering").tick == began
    assert bench.mcu.v_word == 16000
    bench.cut()
    assert bench.dead


def test_the_down_slew_and_its_limit_are_the_eeproms():
    """A lower empties the queue first: what waited is never played (PROTOCOL 7.12)."""
    bench = Bench().energised()
    bench.seg(25000)
    bench.seg(30000)
    bench.pass_ms(100)
    bench.lower()
    bench.pass_ms(3000)
    assert bench.kinds().count("segment") == 2
    assert bench.dead
    assert Timer.SEGMENT not in bench.mcu.core.timers
