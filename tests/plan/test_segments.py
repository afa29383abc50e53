"""Segments in integers: judged as the MCU would judge them, with arithmetic of the test's own."""

from dataclasses import replace
from fractions import Fraction

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from hvhost.bench.file import load_bench
from hvhost.bench.model import Bench
from hvhost.plan.program import HoldStep, RampStep, RestStep, SegmentTarget, Step
from hvhost.plan.segments import TICKS_MAX, Ceilings, fewest_ticks, moves, segments_for, split_move
from hvhost.words.errors import CommandRefused
from tests.plan.conftest import CONFIGS

BENCHES = {name: load_bench(CONFIGS / f"{name}.bench.yaml") for name in ("demo", "small")}


def ramp(to_v: float, slew: float, limit_a: float = 1e-3) -> RampStep:
    """A ramp of a program."""
    return RampStep(number=0, name="ramp", place="t.yaml:1", to_v=to_v, slew_v_per_s=slew, limit_a=limit_a)


def hold(v: float, limit_a: float = 1e-3) -> HoldStep:
    """A hold of a program."""
    return HoldStep(number=0, name="hold", place="t.yaml:1", v=v, limit_a=limit_a, hold_s=1.0, at_most_s=2.0,
                    tolerance=0.01)


def judge(segments: tuple[SegmentTarget, ...], v: int, i: int, bench: Bench, tick_hz: int) -> None:
    """Refuse what the MCU refuses, and what breaks the order of the two channels."""
    settings = bench.settings()
    for segment in segments:
        assert 0 <= segment.v <= settings["vmax"]
        assert 0 <= segment.i <= settings["imax"]
        assert 1 <= segment.ticks <= 0xFFFF_FFFF
        assert abs(segment.v - v) * tick_hz <= settings["vslew"] * segment.ticks
        assert abs(segment.i - i) * tick_hz <= settings["islew"] * segment.ticks
        assert segment.v == v or segment.i == i, "one segment moves one channel"
        v, i = segment.v, segment.i


STEPS = st.one_of(
    st.builds(ramp, st.floats(0.0, 4.8e3), st.floats(1e-3, 1e6), st.floats(1e-6, 4e-3)),
    st.builds(hold, st.floats(0.0, 4.8e3), st.floats(1e-6, 4e-3)),
    st.just(RestStep(number=0, name="rest", place="t.yaml:1", rest_s=1.0)))


@given(st.sampled_from(sorted(BENCHES)), STEPS, st.floats(0, 1), st.floats(0, 1),
       st.sampled_from([100, 1_000, 10_000, 31_250, 1_000_000]))
def test_the_mcu_would_take_every_segment(name: str, step: Step, v_part: float, i_part: float, tick_hz: int) -> None:
    """From any words to any step: no word and no slew above the ceiling, the last word is the target."""
    bench = BENCHES[name]
    ceilings = Ceilings.of(bench)
    v, i = int(v_part * ceilings.v), int(i_part * ceilings.i)
    segments = segments_for(step, v, i, bench, tick_hz)
    judge(segments, v, i, bench, tick_hz)
    v_end, i_end = (segments[-1].v, segments[-1].i) if segments else (v, i)
    if isinstance(step, RestStep):
        assert (v_end, i_end) == (0, i)
        return
    volts = step.to_v if isinstance(step, RampStep) else step.v
    assert abs(bench.voltage.program.value(v_end) - volts) <= 0.5001 * bench.voltage.program.quantum
    assert abs(bench.current.program.value(i_end) - step.limit_a) <= 0.5001 * bench.current.program.quantum


@given(st.sampled_from(sorted(BENCHES)), st.floats(1.0, 4.8e3), st.floats(0.1, 2e3),
       st.sampled_from([1_000, 10_000, 1_000_000]))
def test_durations_add_up(name: str, to_v: float, slew: float, tick_hz: int) -> None:
    """The voltage takes the code change times volts per code over the rate, to the nearest tick or a code's time."""
    bench = BENCHES[name]
    segments = segments_for(ramp(to_v, slew), 0, bench.current.program.code(1e-3), bench, tick_hz)
    assume(segments)
    ticks = sum(segment.ticks for segment in segments)
    exact = Fraction(segments[-1].v) * Fraction(bench.voltage.program.quantum) / Fraction(slew) * tick_hz
    stretched = segments[-1].v if ticks > TICKS_MAX else 0
    at_ceiling = fewest_ticks(segments[-1].v, Ceilings.of(bench).v_slew, tick_hz)
    assert exact - 1 <= ticks
    assert ticks <= max(exact + 1 + stretched, at_ceiling)


@given(st.integers(0, 65_535), st.integers(0, 65_535), st.integers(1, 10**12), st.lists(st.floats(0, 1), max_size=8))
def test_a_cut_move_keeps_to_the_line(start: int, end: int, ticks: int, parts: list[float]) -> None:
    """However often it is cut, every word lies within one code of the straight line, and the end is the target."""
    pieces = split_move(start, end, ticks)
    total = sum(piece for _, piece in pieces)
    assert pieces[-1][0] == end
    assert ticks <= total < ticks + max(1, abs(end - start))
    assert all(1 <= piece <= TICKS_MAX for _, piece in pieces)
    tick, word = 0, start
    for target, length in pieces:
        for part in (0.0, 0.5, *parts, 1.0):
            k = int(part * length)
            sign = 1 if target >= word else -1
            applied = word + sign * (abs(target - word) * k // length)  # as the protocol defines a word in a segment
            exact = start + Fraction((end - start) * (tick + k), total)
            assert abs(applied - exact) < 1 + Fraction(1, 1000)
        tick, word = tick + length, target


def test_ten_codes_in_ten_hours_is_one_segment() -> None:
    """Ten hours at 10 kHz fit into the wire's ticks."""
    assert split_move(0, 10, 10 * 3600 * 10_000) == ((10, 360_000_000),)


def test_ten_codes_in_a_hundred_days_wait_within_a_code() -> None:
    """A code that takes longer than a segment is waited for in segments that change nothing."""
    pieces = split_move(0, 10, 100 * 86_400 * 10_000)
    assert sum(ticks for _, ticks in pieces) == 100 * 86_400 * 10_000
    assert sorted({target for target, _ in pieces}) == list(range(11))
    assert max(ticks for _, ticks in pieces) == TICKS_MAX


def test_going_up_the_current_limit_leads() -> None:
    """From zero: the limit first at full slew, then the ramp."""
    bench = BENCHES["demo"]
    first, second = segments_for(ramp(10e3, 1e3, 2e-3), 0, 0, bench, 10_000)
    assert (first.v, second.i) == (0, first.i)
    assert first.ticks == pytest.approx(0.05 * 10_000, rel=3e-3)  # 2 mA at 40 mA/s
    assert second.ticks == pytest.approx(10 * 10_000, rel=1e-4)


def test_going_down_the_voltage_leads() -> None:
    """The limit is lowered only when the voltage is down."""
    first, second = segments_for(ramp(1e3, 1e3, 1e-3), 26_000, 40_000, BENCHES["demo"], 10_000)
    assert first.i == 40_000
    assert first.v == second.v < 26_000
    assert second.i < 40_000


def test_a_hold_at_its_own_words_asks_for_nothing() -> None:
    """The words stand by themselves; a hold is no segment."""
    bench = BENCHES["demo"]
    words = bench.voltage.program.code(5e3), bench.current.program.code(1e-3)
    assert segments_for(hold(5e3), *words, bench, 10_000) == ()


def test_full_range_in_the_shortest_time_keeps_to_the_slew() -> None:
    """A rate above the ceiling is no way around it: the ticks are those of the ceiling."""
    bench = BENCHES["demo"]
    _, move = segments_for(ramp(24e3, 1e9), 0, 0, bench, 10_000)
    settings = bench.settings()
    assert move.v * 10_000 <= settings["vslew"] * move.ticks
    assert move.v * 10_000 > settings["vslew"] * (move.ticks - 1)


def test_one_code_takes_at_least_a_tick() -> None:
    """The shortest segment is one tick."""
    assert fewest_ticks(1, 10**9, 10_000) == 1
    assert fewest_ticks(0, 1, 10_000) == 1
    assert moves(0, 0, 1, 0, 1, 1) == (SegmentTarget(v=1, i=0, ticks=1),)


@pytest.mark.parametrize("step", [ramp(24.1e3, 1e3), hold(30e3), ramp(1e3, 1e3, 5e-3), ramp(float("nan"), 1e3),
                                  ramp(-1.0, 1e3), ramp(float("inf"), 1e3)])
def test_above_a_ceiling_nothing_is_made(step: Step) -> None:
    """S2: a set-point above the bench's ceiling, below zero, or no number at all is refused."""
    with pytest.raises(CommandRefused):
        segments_for(step, 0, 0, BENCHES["demo"], 10_000)


def test_rounding_never_lifts_a_word_over_the_ceiling() -> None:
    """At the ceiling itself the word is the highest that does not exceed it."""
    for bench in BENCHES.values():
        for at in (bench.v_max, bench.v_max * (1 - 1e-12)):
            assert segments_for(ramp(at, 1e3), 0, 0, bench, 10_000)[-1].v == bench.settings()["vmax"]


def test_zero_volts_is_word_zero_whatever_the_calibration_says() -> None:
    """A calibration whose zero is not at code 0 still programs zero for zero volts: the MCU arms from zero words."""
    bench = BENCHES["demo"]
    program = replace(bench.voltage.program, zero=-12.0)
    shifted = replace(bench, voltage=replace(bench.voltage, program=program))
    assert segments_for(ramp(0.0, 1e3), 500, 0, shifted, 10_000)[0].v == 0
