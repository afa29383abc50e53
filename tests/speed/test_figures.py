"""The statistics: medians of interleaved blocks, p99 with its interval, and what counts as within a bound."""

from collections.abc import Sequence

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.speed.figures import Line, Sides, flat, interleaved, p99_interval, quantile, spread


def line(measured: float, bound: float, **changes: object) -> Line:
    """A line with made-up words."""
    values = {"budget": "B1", "what": "w", "measured": measured, "bound": bound, "unit": "x", "against": "a", **changes}
    return Line(**values)  # type: ignore[arg-type]


@pytest.mark.parametrize(("measured", "worst", "within"), [
    (1.0, "most", True), (2.0, "most", True), (2.1, "most", False), (2.0, "least", True), (1.9, "least", False)])
def test_a_bound_is_the_most_or_the_least_and_itself_allowed(measured: float, worst: str, within: bool) -> None:
    """Some budgets are ceilings, some floors."""
    assert line(measured, 2.0, worst=worst).within is within


def test_a_figure_without_a_bound_of_its_own_judges_nothing() -> None:
    """It is shown for the reader and never fails the whole."""
    assert line(9.0, 1.0, judged=False).within


def test_both_sides_are_taken_in_turn_and_neither_always_first() -> None:
    """Other work on the machine must weigh on both."""
    order: list[str] = []

    def side(name: str) -> Sequence[float]:
        order.append(name)
        return [1.0]

    sides = interleaved(lambda: side("a"), lambda: side("b"), blocks=4)
    assert "".join(order) == "abbaabba"
    assert len(sides.ours) == len(sides.other) == 4


def test_the_ratio_is_that_of_the_medians() -> None:
    """One slow call among many moves nothing."""
    sides = Sides(ours=((2.0, 2.0, 90.0), (2.0, 2.0, 2.0)), other=((1.0, 1.0, 1.0), (1.0, 50.0, 1.0)))
    assert sides.ratio == 2.0
    assert sides.block_ratios == (2.0, 2.0)
    assert sides.raw()["per_block"] == 3


@given(st.lists(st.floats(0.0, 1e3), min_size=1, max_size=50), st.floats(0.0, 1.0))
def test_a_quantile_is_one_of_the_values_and_rises_with_its_share(values: list[float], share: float) -> None:
    """Nearest rank: nothing is interpolated."""
    assert quantile(values, share) in values
    assert quantile(values, 0.0) <= quantile(values, share) <= quantile(values, 1.0) == max(values)


@given(st.lists(st.lists(st.floats(0.0, 1e3), min_size=3, max_size=3), min_size=1, max_size=8))
def test_the_interval_lies_within_the_values_and_is_the_same_each_time(blocks: list[list[float]]) -> None:
    """Resampled blocks hold nothing but what was measured; a fixed seed gives a fixed interval."""
    low, high = p99_interval(blocks)
    assert min(flat(blocks)) <= low <= high <= max(flat(blocks))
    assert (low, high) == p99_interval(blocks)
    assert spread(blocks, 1.0)["largest"] == max(flat(blocks))
