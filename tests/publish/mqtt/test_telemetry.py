"""Intervals in virtual time: every sample once, no peak hidden, no flood after a stall."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.mqtt.telemetry import Interval, IntervalKeeper
from hvhost.publish.spans import SpanView

NUMBERS = st.floats(-1e5, 1e5)


def span(value: float, pairs: int = 10) -> SpanView:
    """A span whose samples are all alike."""
    return SpanView(pairs=pairs, volts=value, volts_min=value, volts_max=value, amps=value / 1e6, amps_min=value / 1e6,
                    amps_max=value / 1e6)


def test_an_interval_holds_the_peak_and_the_weighted_mean() -> None:
    """One short peak among ten spans stands in the maximum; the mean counts samples, not spans."""
    keeper = IntervalKeeper(1.0)
    assert keeper.add(0.0, span(100.0, 30)) is None
    for n in range(1, 10):
        assert keeper.add(n * 0.1, span(9000.0 if n == 4 else 100.0, 1 if n == 4 else 30)) is None
    done = keeper.add(1.0, span(100.0, 30))
    assert done is not None
    assert (done.span.volts_min, done.span.volts_max, done.span.pairs) == (100.0, 9000.0, 301)
    assert done.span.volts == pytest.approx((300 * 100.0 + 9000.0) / 301)
    assert done.span_s == pytest.approx(1.0)


def test_an_interval_without_samples_says_so_and_repeats_nothing() -> None:
    """A link that is lost gives intervals of no pairs; the value before is not told again."""
    keeper = IntervalKeeper(1.0)
    keeper.add(0.0, span(5.0))
    assert keeper.add(1.0, None) == Interval(span_s=1.0, span=span(5.0))
    assert keeper.add(2.0, None) == Interval(span_s=1.0, span=SpanView())


def test_a_stall_gives_one_long_interval_and_keeps_the_phase() -> None:
    """After 7.3 s of silence there is one interval of 7.3 s, and the next one is due at its old moment."""
    keeper = IntervalKeeper(1.0)
    keeper.add(0.0, None)
    stalled = keeper.add(7.3, span(1.0))
    assert stalled is not None
    assert stalled.span_s == pytest.approx(7.3)
    assert keeper.add(7.9, span(2.0)) is None
    late = keeper.add(8.0, span(2.0))
    assert late is not None
    assert late.span_s == pytest.approx(0.7)


@given(st.lists(st.tuples(st.floats(0.001, 3.0), NUMBERS, st.integers(0, 50)), min_size=1, max_size=60),
       st.floats(0.1, 2.0))
def test_every_sample_is_in_exactly_one_interval(steps: list[tuple[float, float, int]], every_s: float) -> None:
    """Whatever the calls' times: pairs add up, extremes of all are extremes of the intervals, one interval a call."""
    keeper, now_s, done = IntervalKeeper(every_s), 0.0, []
    for step_s, value, pairs in steps:
        now_s += step_s
        done.append(keeper.add(now_s, span(value, pairs) if pairs else SpanView()))
    last = keeper.add(now_s + every_s, None)
    done.append(last)
    told = [one.span for one in done if one is not None]
    assert sum(one.pairs for one in told) == sum(pairs for *_, pairs in steps)
    values = [value for _, value, pairs in steps if pairs]
    if values:
        assert max(one.volts_max for one in told if one.volts_max is not None) == max(values)
        assert min(one.volts_min for one in told if one.volts_min is not None) == min(values)
    for one in told:
        if one.pairs:
            assert one.volts_min is not None
            assert one.volts is not None
            assert one.volts_max is not None
            assert one.volts_min - 1e-6 <= one.volts <= one.volts_max + 1e-6
