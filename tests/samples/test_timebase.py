"""Ticks to host time and UTC: wrap, drift, jitter, steps of the wall clock."""

import random

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.samples.timebase import BUCKETS, WRAP, TickClock, envelope

HZ = 10_000


def arrivals(seconds: float, drift: float, seed: int, *, least_s: float = 0.0005) -> list[tuple[int, float]]:
    """(tick, arrival) each 32 ms: true tick length (1 + drift) / HZ, delays mostly small, sometimes 50 ms."""
    chance = random.Random(seed)
    made = []
    for k in range(int(seconds / 0.032)):
        tick = 320 * k
        late = least_s + chance.expovariate(1 / 0.001) + (0.05 if chance.random() < 0.02 else 0.0)
        made.append((tick, 1000.0 + tick * (1 + drift) / HZ + late))
    return made


@pytest.mark.parametrize("drift", [0.0, 50e-6, -200e-6, 1e-3])
def test_drift_and_offset_are_found_through_jitter(drift: float) -> None:
    """After two minutes the tick's time is right to a millisecond beside the least delay, the drift to 10 ppm."""
    clock = TickClock(HZ)
    for tick, arrival in arrivals(240.0, drift, 3):
        clock.observe(tick, arrival)
    assert clock.host_s(tick) == pytest.approx(1000.0 + tick * (1 + drift) / HZ + 0.0005, abs=1e-3)
    assert clock.drift == pytest.approx(drift, abs=1e-5)
    assert clock.tick_at(clock.host_s(tick)) == tick


@settings(max_examples=20, deadline=None)
@given(st.integers(0, 10**6), st.floats(-1e-3, 1e-3))
def test_time_never_runs_backwards_after_the_first_second(seed: int, drift: float) -> None:
    """The estimate is slewed: later ticks have later times, whatever the arrivals were."""
    clock, last = TickClock(HZ), -1.0
    for tick, arrival in arrivals(60.0, drift, seed):
        clock.observe(tick, arrival)
        now = clock.host_s(tick)
        assert now > last or tick <= HZ
        last = now


def test_lateness_is_measured_against_the_fastest() -> None:
    """A line that took 300 ms longer than the fastest is late by 300 ms; the fastest is not late."""
    clock = TickClock(HZ)
    assert clock.observe(0, 5.0) == 0.0
    assert clock.observe(1000, 5.1) == 0.0
    assert clock.observe(2000, 5.5) == pytest.approx(0.3)


@given(st.integers(0, 2**40), st.integers(0, 2**34), st.floats(-0.4, 0.4))
def test_a_tick_is_unwrapped_through_a_silence_of_any_length(start: int, silence: int, part: float) -> None:
    """Also when whole wraps passed unseen, as long as the clocks part by less than half a wrap."""
    clock = TickClock(HZ)
    clock.observe(start, 0.0)
    now = silence / HZ + part * WRAP / HZ
    assert clock.unwrap((start + silence) % WRAP, now) == start + silence


def test_utc_follows_the_anchor_and_a_step_of_the_wall_clock_moves_no_tick() -> None:
    """A step starts a new anchor; the old one goes on for who holds it, and the host's times do not change."""
    clock = TickClock(HZ)
    assert clock.anchor_at(5.0, 10**18) is None  # nothing observed yet
    clock.observe(0, 5.0)
    assert clock.utc_ns(0) == 0
    first = clock.anchor_at(5.0, 10**18)
    assert first is not None
    assert clock.utc_ns(HZ) == 10**18 + 10**9
    before = clock.host_s(HZ)
    assert clock.anchor_at(6.0, 10**18 + 10**9 + 40_000_000) is None  # slewing is not a step
    second = clock.anchor_at(6.0, 10**18 - 3600 * 10**9)
    assert second is clock.anchor
    assert second is not None
    assert clock.host_s(HZ) == before
    assert clock.utc_ns(HZ) == 10**18 - 3600 * 10**9
    assert clock.utc_ns(2 * HZ) - clock.utc_ns(HZ) == 10**9


def test_state_is_bounded() -> None:
    """Hours of blocks leave a fixed number of minima."""
    clock = TickClock(HZ)
    for k in range(5000):
        clock.observe(HZ * k, float(k))
    assert len(clock._minima) == BUCKETS
    assert clock.started


def test_the_envelope_supports_from_below() -> None:
    """No point lies below the line, and it touches the hull over the middle of the points."""
    points = [(0, 0.0), (10, 1.5), (20, 2.0), (30, 3.3), (40, 4.0)]
    slope, tick, at = envelope(points, 0.1)
    assert slope == pytest.approx(0.1)
    assert all(a >= at + (t - tick) * slope - 1e-12 for t, a in points)
    assert envelope([(7, 3.0)], 0.1) == (0.1, 7, 3.0)
