"""The trend: bounded, no peak lost, drawn where it belongs."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.trend import TrendKeeper, braille_plot, nice_top

VALUES = st.floats(0.0, 3e4)


def bits(cell: str) -> int:
    """Return the dots of a braille cell; the order of dots is that of Unicode 15, block 2800."""
    return 0 if cell == " " else ord(cell) - 0x2800


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


@given(st.lists(st.tuples(st.floats(0, 1e5), st.floats(-1e5, 1e5), st.floats(-1e5, 1e5)), max_size=50),
       st.integers(0, 40), st.integers(0, 10), st.floats(0.0, 1e5))
def test_a_plot_has_exactly_its_room(points: list[tuple[float, float, float]], width: int, rows: int,
                                     top: float) -> None:
    """Any points in any order give the asked number of lines of the asked width."""
    spans = sorted((t, min(a, b), max(a, b)) for t, a, b in points)
    lines = braille_plot(spans, width, rows, top)
    assert [len(line) for line in lines] == ([width] * rows if width and rows else [])


def test_top_and_bottom_are_where_they_are_said_to_be() -> None:
    """A span from nothing to the top fills its column; a flat zero lies on the lowest dots."""
    full = braille_plot([(0.0, 0.0, 0.0), (1.0, 0.0, 10.0)], 4, 3, 10.0)
    assert [bits(line[-1]) & 0xB8 for line in full] == [0xB8, 0xB8, 0xB8]
    flat = braille_plot([(0.0, 0.0, 0.0), (1.0, 0.0, 0.0)], 4, 3, 10.0)
    assert flat[0] == flat[1] == "    "
    assert all(bits(cell) == 0xC0 for cell in flat[2])


def test_a_ramp_is_joined_and_a_gap_is_not() -> None:
    """Neighbours make a line without holes; a pause in time stays empty."""
    ramp = braille_plot([(float(t), float(t), float(t)) for t in range(5)], 20, 4, 4.0)
    columns = ["".join(line[n] for line in ramp).strip() for n in range(20)]
    assert all(columns)
    gap = braille_plot([(0.0, 1.0, 1.0), (1.0, 1.0, 1.0), (2.0, 1.0, 1.0), (20.0, 1.0, 1.0)], 20, 2, 4.0)
    assert "      " in gap[1]


# Renard-like steps of 1-2-2.5-5, as on the axes of instruments (common practice).
@pytest.mark.parametrize(("value", "top"), [(0.0, 1.0), (1.0, 1.0), (1.01, 2.0), (2.3, 2.5), (18_014.0, 20_000.0),
                                            (3.4e-3, 5e-3), (9.9, 10.0), (math.nan, 1.0), (-3.0, 1.0)])
def test_the_axis_ends_at_a_round_number(value: float, top: float) -> None:
    """The least round number that holds the value."""
    assert nice_top(value) == pytest.approx(top)


@given(st.floats(1e-9, 1e9))
def test_the_axis_always_holds_the_value(value: float) -> None:
    """Never below, never more than 2.5 times as much."""
    assert value * (1 - 1e-8) <= nice_top(value) <= value * 2.5
