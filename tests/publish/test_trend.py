"""The trend: bounded, and no peak lost."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.snapshot import TrendBucket
from hvhost.publish.trend import RECENT_S, RecentKeeper, TrendKeeper, brief

VALUES = st.floats(0.0, 3e4)


@given(st.lists(st.tuples(st.floats(0.001, 5.0), VALUES, VALUES), min_size=1, max_size=400))
def test_memory_is_bounded_and_no_peak_is_lost(blocks: list[tuple[float, float, float]]) -> None:
    """However many blocks come, at most ``kept`` buckets hold their extremes, in order of time."""
    keeper, t_s = TrendKeeper(kept=16), 0.0
    for step_s, a, b in blocks:
        t_s += step_s
        keeper.add(t_s, min(a, b), max(a, b), -a, b)
    buckets = keeper.buckets()
    assert len(buckets) <= 16
    assert max(one.v_max for one in buckets) == max(max(a, b) for _, a, b in blocks)
    assert min(one.v_min for one in buckets) == min(min(a, b) for _, a, b in blocks)
    assert max(one.i_max for one in buckets) == max(b for _, _, b in blocks)
    assert min(one.i_min for one in buckets) == min(-a for _, a, _ in blocks)
    times = [one.t_s for one in buckets]
    assert times == sorted(times)
    assert times[-1] == t_s


def test_ten_hours_take_as_much_room_as_ten_seconds() -> None:
    """Buckets grow with the run, so that all of it is on the screen."""
    keeper = TrendKeeper()
    for second in range(36_000):
        keeper.add(float(second), 0.0, 1.0, 0.0, 1.0)
    assert 100 < len(keeper.buckets()) <= 240
    assert keeper.buckets()[0].t_s < 1000.0
    keeper.clear()
    assert keeper.buckets() == ()


@pytest.mark.parametrize("bad", [math.nan, math.inf])
def test_what_is_no_number_is_left_out(bad: float) -> None:
    """A missing reading leaves a gap, not a spike."""
    keeper = TrendKeeper()
    keeper.add(1.0, bad, bad, 0.0, 0.0)
    assert keeper.buckets() == ()


@given(st.lists(st.tuples(st.floats(0.001, 5.0), VALUES, VALUES), min_size=1, max_size=400))
def test_the_last_minute_is_kept_however_long_the_run(blocks: list[tuple[float, float, float]]) -> None:
    """At most 121 buckets, none older than a minute, every extreme of that minute in one of them."""
    keeper, t_s, kept = RecentKeeper(), 0.0, []
    for step_s, a, b in blocks:
        t_s += step_s
        kept.append((t_s, max(a, b)))
        keeper.add(t_s, min(a, b), max(a, b), 0.0, 0.0)
    buckets = keeper.buckets()
    assert len(buckets) <= 121
    assert all(one.t_s >= t_s - RECENT_S for one in buckets)
    assert max(one.v_max for one in buckets) >= max(v for t, v in kept if t >= t_s - RECENT_S + 0.5)
    keeper.clear()
    assert keeper.buckets() == ()


def test_the_last_minute_leaves_out_what_is_no_number() -> None:
    """A missing reading leaves a gap there too."""
    keeper = RecentKeeper()
    keeper.add(1.0, math.nan, 0.0, 0.0, 0.0)
    assert keeper.buckets() == ()


def test_buckets_go_out_short() -> None:
    """To the millisecond, millivolt and nanoampere: less than half the bytes, and no screen shows more."""
    assert brief((TrendBucket(1.23456, 1.00049, 2.0006, 1.23456e-6, 2e-3),)) == (
        TrendBucket(1.235, 1.0, 2.001, 1.235e-6, 2e-3),)
