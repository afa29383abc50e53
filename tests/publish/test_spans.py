"""Spans between two snapshots: weighted means, true extremes, honest counts of what was not seen."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.spans import SpanKeeper, SpanView

VALUES = st.floats(-1e6, 1e6)
SPANS = st.one_of(st.just(SpanView()), st.builds(
    lambda pairs, a, b, c, gap: SpanView(pairs=pairs, volts_min=min(a, b, c), volts=sorted((a, b, c))[1],
                                         volts_max=max(a, b, c), amps_min=a, amps=a, amps_max=a, gap=gap),
    st.integers(1, 100), VALUES, VALUES, VALUES, st.booleans()))


def add(keeper: SpanKeeper, index: int, value: float, gap: int = 0) -> None:
    """Hand in a block of 32 equal pairs."""
    keeper.add(index, 32, volts=(value, value, value), amps=(0.0, 0.0, 0.0), gap=gap)


def test_a_span_covers_the_blocks_since_the_last_one() -> None:
    """Three blocks make one span; the next begins empty; looking takes nothing away."""
    keeper = SpanKeeper()
    for n, value in enumerate((1.0, 9.0, 2.0)):
        add(keeper, 32 * n, value)
    assert keeper.so_far == keeper.so_far
    span = keeper.take()
    assert (span.pairs, span.volts_min, span.volts_max, span.unseen) == (96, 1.0, 9.0, 0)
    assert span.volts == pytest.approx(4.0)
    assert keeper.take() == SpanView()


def test_pairs_that_nobody_handed_in_are_counted() -> None:
    """A jump of the index is unseen pairs, a marked gap is a gap, an index that goes back is a new session."""
    keeper = SpanKeeper()
    add(keeper, 0, 1.0)
    add(keeper, 96, 1.0)
    assert keeper.take().unseen == 64
    add(keeper, 138, 1.0, gap=10)
    assert (keeper.so_far.unseen, keeper.take().gap) == (0, True)
    add(keeper, 0, 1.0)
    assert keeper.take().unseen == 0


def test_a_block_that_is_not_finite_is_no_sample() -> None:
    """Nothing that is not a number reaches an outlet."""
    keeper = SpanKeeper()
    keeper.add(0, 32, volts=(0.0, math.nan, 0.0), amps=(0.0, 0.0, 0.0))
    keeper.add(32, 0, volts=(0.0, 0.0, 0.0), amps=(0.0, 0.0, 0.0))
    assert keeper.take() == SpanView()


@given(SPANS, SPANS, SPANS)
def test_joining_does_not_depend_on_grouping(a: SpanView, b: SpanView, c: SpanView) -> None:
    """(a + b) + c and a + (b + c) cover the same: exactly in counts and extremes, nearly in means."""
    one, two = a.joined(b).joined(c), a.joined(b.joined(c))
    for name in ("pairs", "gap", "volts_min", "volts_max", "amps_min", "amps_max"):
        assert getattr(one, name) == getattr(two, name)
    if one.pairs:
        assert one.volts == pytest.approx(two.volts, rel=1e-9, abs=1e-6)
