"""Plots in braille: measured spans where they belong, the future sparse, the present marked."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.plot import MARK, Plot, nice_top

FLOATS = st.floats(-1e5, 1e5)


def bits(cell: str) -> int:
    """Return the dots of a braille cell; the order of dots is that of Unicode 15, block 2800."""
    return ord(cell) - 0x2800 if "⠀" <= cell <= "⣿" else 0


def plotted(points: list[tuple[float, float, float]], width: int, rows: int, top: float) -> list[str]:
    """Return the plot of spans over exactly their own time."""
    plot = Plot(width, rows, points[0][0] if points else 0.0, points[-1][0] if points else 0.0, top)
    plot.spans(points)
    return plot.lines()


@given(st.lists(st.tuples(st.floats(0, 1e5), FLOATS, FLOATS), max_size=50), st.lists(st.tuples(FLOATS, FLOATS)),
       st.integers(0, 40), st.integers(0, 10), st.floats(0.0, 1e5), FLOATS, FLOATS)
def test_a_plot_has_exactly_its_room(points: list[tuple[float, float, float]], course: list[tuple[float, float]],
                                     width: int, rows: int, top: float, begin_s: float, end_s: float) -> None:
    """Any points over any stretch give the asked number of lines of the asked width."""
    plot = Plot(width, rows, begin_s, end_s, top)
    plot.spans(sorted((t, min(a, b), max(a, b)) for t, a, b in points))
    plot.dotted(sorted(course))
    plot.mark(begin_s)
    assert [len(line) for line in plot.lines()] == [width] * rows


def test_top_and_bottom_are_where_they_are_said_to_be() -> None:
    """A span from nothing to the top fills its column; a flat zero lies on the lowest dots."""
    full = plotted([(0.0, 0.0, 0.0), (1.0, 0.0, 10.0)], 4, 3, 10.0)
    assert [bits(line[-1]) & 0xB8 for line in full] == [0xB8, 0xB8, 0xB8]
    flat = plotted([(0.0, 0.0, 0.0), (1.0, 0.0, 0.0)], 4, 3, 10.0)
    assert flat[0] == flat[1] == "    "
    assert all(bits(cell) == 0xC0 for cell in flat[2])


def test_a_ramp_is_joined_and_a_gap_is_not() -> None:
    """Neighbours make a line without holes; a pause in time stays empty."""
    ramp = plotted([(float(t), float(t), float(t)) for t in range(5)], 20, 4, 4.0)
    assert all("".join(line[n] for line in ramp).strip() for n in range(20))
    gap = plotted([(0.0, 1.0, 1.0), (1.0, 1.0, 1.0), (2.0, 1.0, 1.0), (20.0, 1.0, 1.0)], 20, 2, 4.0)
    assert "      " in gap[1]


def test_what_lies_before_the_stretch_is_left_out() -> None:
    """A plot of the last minute holds nothing older."""
    plot = Plot(10, 2, 100.0, 110.0, 4.0)
    plot.spans([(t, 1.0, 1.0) for t in (50.0, 60.0, 108.0, 110.0)])
    lines = plot.lines()
    assert lines[1][:7].strip() == ""
    assert lines[1][9] != " "


def test_the_future_is_sparse_and_the_past_is_not() -> None:
    """Without any colour: every other column to come is empty."""
    past, future = Plot(30, 1, 0.0, 10.0, 1.0), Plot(30, 1, 0.0, 10.0, 1.0)
    past.spans([(float(t), 1.0, 1.0) for t in range(11)])
    future.dotted([(0.0, 1.0), (10.0, 1.0)])
    count = [sum(bin(bits(cell)).count("1") for cell in plot.lines()[0]) for plot in (past, future)]
    assert count == [60, 30]


def test_the_future_of_a_ramp_rises() -> None:
    """The dots lie on the straight line between two corners."""
    plot = Plot(6, 3, 0.0, 10.0, 10.0)
    plot.dotted([(0.0, 0.0), (10.0, 10.0)])
    lines = plot.lines()
    assert bits(lines[2][0]) == 0x40
    assert lines[0].strip()
    assert lines[0][:3].strip() == ""


def test_a_line_that_begins_before_the_plot_is_not_bent() -> None:
    """Half of a ramp lies before the stretch: the other half begins at half the height."""
    plot = Plot(10, 4, 5.0, 10.0, 10.0)
    plot.dotted([(0.0, 0.0), (10.0, 10.0)])
    lines = plot.lines()
    assert lines[2].strip() == ""
    assert lines[3].strip() == ""
    assert lines[1][0] != " "


def test_the_present_is_a_mark_behind_what_is_drawn() -> None:
    """A line of marks stands at the present and hides no dot."""
    plot = Plot(10, 2, 0.0, 10.0, 1.0)
    plot.spans([(0.0, 0.0, 0.0), (5.0, 0.0, 0.0)])
    plot.mark(5.0)
    upper, lower = plot.lines()
    assert upper == "     " + MARK + "    " or upper == "    " + MARK + "     "
    assert MARK not in lower
    plot.mark(50.0)
    assert MARK not in "".join(plot.lines())


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
