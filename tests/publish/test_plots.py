"""The plots of the screen."""

from dataclasses import replace

import pytest

from hvhost.publish.plot import MARK
from hvhost.publish.plots import after, choices, plots, shown
from hvhost.publish.snapshot import CoursePoint, Permission
from hvhost.publish.wording import Plotted, View
from tests.pictures.states import IDLE, RUNNING, STATES, TRIPPED

VIEW = View()


def text(snapshot, view: View = VIEW, width: int = 120, rows: int = 12) -> str:
    """The plot's lines."""
    return "\n".join(line.plain for line in plots(snapshot, view, width, rows))


@pytest.mark.parametrize(("width", "rows"), [(80, 3), (80, 5), (120, 11), (200, 20), (30, 3)])
def test_every_state_and_choice_fits(width: int, rows: int) -> None:
    """Exactly the rows, none wider than the width, or nothing at all."""
    for plotted in Plotted:
        for name in ("idle", "requested", "warning", "hold", "pausing", "tripped", "lost", "negative bench"):
            lines = plots(STATES[name][0], View(plotted=plotted), width, rows)
            assert len(lines) in (0, rows)
            assert all(line.cell_len <= width for line in lines)


def test_the_future_is_drawn_ahead_of_the_present() -> None:
    """Right of the present's marks the voltage goes on, dotted; the current's plot ends there."""
    drawn = text(RUNNING)
    assert "now" in drawn
    assert "+27 s" in drawn
    volts = [line[:60] for line in drawn.split("\n")[:-1]]
    present = max(line.rfind(MARK) for line in volts)
    assert 0 < present < 59
    assert any("⠀" < cell <= "⣿" for line in volts for cell in line[present + 1:])
    without = text(replace(RUNNING, course=()))
    assert MARK not in without
    assert "+27 s" not in without


def test_with_few_rows_the_times_stand_beside() -> None:
    """At 80x24 the plot has three or four rows."""
    assert "run 1:18" in text(RUNNING, width=80, rows=4)
    assert "+27 s" in text(RUNNING, width=80, rows=4)
    assert "run 1:18" in text(RUNNING, width=80, rows=3)


def test_before_anything_was_measured_the_plan_stands_alone() -> None:
    """While the request is open the whole width shows what will be done."""
    requested = text(STATES["requested"][0], width=80, rows=4)
    assert "planned" in requested
    assert "A" not in requested


def test_the_last_minute_is_the_last_minute() -> None:
    """A key shows it in more detail than the run has, with half a minute ahead at most."""
    far = replace(RUNNING, course=(CoursePoint(1078.0, 18e3), CoursePoint(9000.0, 18e3)))
    drawn = text(far, View(plotted=Plotted.MINUTE))
    assert "-1:00" in drawn
    assert "+30 s" in drawn
    assert "last 1:00" in drawn


def test_the_last_arc_is_shown_once_nothing_is_energised() -> None:
    """While running the run has the room; after the trip what tripped it; a key overrules."""
    arc = replace(RUNNING, evidence=TRIPPED.evidence)
    assert shown(arc, VIEW) is Plotted.RUN
    assert shown(TRIPPED, VIEW) is Plotted.EVIDENCE
    assert shown(arc, View(plotted=Plotted.EVIDENCE)) is Plotted.EVIDENCE
    assert shown(RUNNING, View(plotted=Plotted.EVIDENCE)) is Plotted.RUN
    drawn = text(TRIPPED, rows=6)
    assert "last trip" in drawn
    assert "-63 ms" in drawn
    assert "+64 ms" in drawn
    assert "breakdown" in drawn


def test_with_many_rows_both_are_shown() -> None:
    """On a wall monitor nobody needs the key."""
    drawn = text(TRIPPED, width=200, rows=20)
    assert "whole run" in drawn
    assert "last trip" in drawn


def test_the_key_goes_round_what_there_is() -> None:
    """Run, minute, arc and again; without an arc only the two."""
    seen, view = [], VIEW
    for _ in range(4):
        view = View(plotted=after(TRIPPED, view))
        seen.append(shown(TRIPPED, view))
    assert seen == [Plotted.RUN, Plotted.MINUTE, Plotted.EVIDENCE, Plotted.RUN]
    assert after(RUNNING, VIEW) is Plotted.MINUTE
    assert after(RUNNING, View(plotted=Plotted.MINUTE)) is Plotted.RUN
    assert choices(replace(IDLE, trend=(), course=())) == ()
    assert after(replace(IDLE, trend=(), course=()), VIEW) is Plotted.BY_STATE


def test_an_unknown_output_adds_no_present() -> None:
    """S13: a reading older than the lease is not drawn as the newest point."""
    gone = replace(RUNNING, reading=replace(RUNNING.reading, volts_max=25e3, age_s=3.0), permission=Permission.RUNNING)
    assert "50 kV" not in text(gone)
    assert "25 kV" in text(replace(RUNNING, reading=replace(RUNNING.reading, volts_max=24e3, age_s=-1e-3)))
