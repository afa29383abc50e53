"""Interpolation: within one code of the line, the same as its incremental twin."""

from collections.abc import Iterator
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.wire.interpolate import (
    TICKS_MAX,
    WORD_MAX,
    Ramp,
    current_first,
    lower_ticks,
    lowered_word,
    shortest,
    within_slew,
    word_at,
)

words = st.integers(0, WORD_MAX)


def incremental(start: int, target: int, ticks: int) -> Iterator[int]:
    """The twin: add whole codes tick by tick and carry the remainder, as a small MCU does."""
    change, sign = abs(target - start), 1 if target >= start else -1
    whole, part = divmod(change, ticks)
    word, carried = start, 0
    yield word
    for _ in range(ticks):
        word, carried = word + sign * whole, carried + part
        if carried >= ticks:
            word, carried = word + sign, carried - ticks
        yield word


@given(words, words, st.integers(1, 3000))
def test_the_incremental_twin_gives_the_same_words(start: int, target: int, ticks: int) -> None:
    """Every word equals that of adding whole codes with a carried remainder."""
    assert [word_at(start, target, ticks, k) for k in range(ticks + 1)] == list(incremental(start, target, ticks))


@pytest.mark.parametrize(("start", "target"), [(0, WORD_MAX), (WORD_MAX, 0)])
def test_full_range_in_a_second(start: int, target: int) -> None:
    """Full range in 10,000 ticks: the twin agrees at every tick."""
    assert [word_at(start, target, 10_000, k) for k in range(10_001)] == list(incremental(start, target, 10_000))


def test_ten_codes_in_ten_hours() -> None:
    """Ten codes in 360 million ticks: a step each tenth part, to the tick, up and down alike."""
    ticks = 10 * 3600 * 10_000
    for step in range(1, 11):
        at = ticks // 10 * step
        assert (word_at(100, 110, ticks, at - 1), word_at(100, 110, ticks, at)) == (99 + step, 100 + step)
        assert (word_at(110, 100, ticks, at - 1), word_at(110, 100, ticks, at)) == (111 - step, 110 - step)


@given(words, words, st.integers(1, TICKS_MAX), st.data())
def test_each_word_is_within_one_code_of_the_line(start: int, target: int, ticks: int, data: st.DataObject) -> None:
    """A word is less than one code from the exact line, on the side of the start, and the last is the target."""
    k = data.draw(st.integers(0, ticks))
    word = word_at(start, target, ticks, k)
    exact = start + Fraction((target - start) * k, ticks)
    assert abs(exact - word) < 1
    assert min(start, target) <= word <= max(start, target)
    assert abs(word - start) <= abs(exact - start)
    assert word_at(start, target, ticks, ticks) == target
    assert word_at(start, target, ticks, 0) == start


@given(words, st.integers(1, 10_000_000), st.sampled_from((100, 10_000, 32_768)))
def test_a_lower_ends_at_zero_when_it_says(start: int, slew: int, tick_hz: int) -> None:
    """The word is zero at the told tick and not before, and never rises."""
    end = lower_ticks(start, slew, tick_hz)
    assert lowered_word(start, slew, tick_hz, end) == 0
    assert end == 0 or lowered_word(start, slew, tick_hz, end - 1) >= 0
    assert end == 0 or slew * (end - 1) < start * tick_hz
    some = [lowered_word(start, slew, tick_hz, k) for k in range(0, end + 1, max(1, end // 50))]
    assert some == sorted(some, reverse=True)


@given(words, words, st.sampled_from((100, 10_000)), st.integers(1, 10**7))
def test_the_shortest_segment_is_just_within_the_slew(start: int, target: int, tick_hz: int, slew: int) -> None:
    """The fewest ticks are allowed and one fewer is not."""
    ticks = shortest(start, target, tick_hz, slew)
    assert within_slew(start, target, ticks, tick_hz, slew)
    assert ticks == 1 or not within_slew(start, target, ticks - 1, tick_hz, slew)


def test_load_order_and_both_channels() -> None:
    """Going up the current word is loaded first, going down or level the voltage; both end on their targets."""
    assert current_first(1, 2)
    assert not current_first(2, 1)
    assert not current_first(2, 2)
    ramp = Ramp(v0=0, i0=50, v1=10, i1=0, ticks=4)
    assert [ramp.at(k) for k in range(6)] == [(0, 50), (2, 38), (5, 25), (7, 13), (10, 0), (10, 0)]
