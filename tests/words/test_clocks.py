"""The clock that is turned by hand."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.words.clocks import Clock, VirtualClock


def test_starts_at_zero_and_moves_only_when_told() -> None:
    """Monotonic time starts at zero; UTC runs with it."""
    clock: Clock = VirtualClock()
    assert clock.now_s() == 0.0
    before = clock.utc_ns()
    assert clock.now_s() == 0.0
    assert clock.utc_ns() == before


@given(st.lists(st.integers(0, 10**12), max_size=30))
def test_steps_add_up_exactly(steps: list[int]) -> None:
    """Whole nanoseconds never lose a bit, in both times."""
    clock = VirtualClock()
    origin = clock.utc_ns()
    for step in steps:
        clock.advance_ns(step)
    assert clock.elapsed_ns == sum(steps)
    assert clock.utc_ns() - origin == sum(steps)


def test_advancing_in_seconds() -> None:
    """A tenth of a second, ten times, is a second."""
    clock = VirtualClock()
    for _ in range(10):
        clock.advance_s(0.1)
    assert clock.now_s() == 1.0


def test_never_goes_back() -> None:
    """A step back is refused, a moment already past changes nothing."""
    clock = VirtualClock()
    clock.advance_s(5.0)
    with pytest.raises(ValueError, match="never goes back"):
        clock.advance_ns(-1)
    clock.advance_to_s(3.0)
    assert clock.now_s() == 5.0
    clock.advance_to_s(7.5)
    assert clock.now_s() == 7.5


def test_wall_clock_jump_leaves_monotonic_time_alone() -> None:
    """Setting the wall clock moves UTC only (S10)."""
    clock = VirtualClock()
    clock.advance_s(1.0)
    before = clock.utc_ns()
    clock.jump_utc_ns(-3_600_000_000_000)
    assert clock.now_s() == 1.0
    assert clock.utc_ns() == before - 3_600_000_000_000
