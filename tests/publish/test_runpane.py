"""The run in words."""

from dataclasses import replace

import pytest

from hvhost.publish.runpane import hold_clock, run_lines
from hvhost.publish.snapshot import HoldView, Permission, Phase
from hvhost.publish.wording import View
from tests.pictures.draw import ZONE
from tests.pictures.states import HELD, IDLE, RUN, RUNNING, STATES, TRIPPED

VIEW = View(zone=ZONE)
BARE = HoldView(elapsed_s=42.0, required_s=60.0, at_most_s=90.0)


def words(hold: HoldView, width: int = 80, since_s: float = 0.0, **changes: object) -> str:
    """The clock's line."""
    return hold_clock(hold, replace(RUNNING, **changes), View(since_s=since_s), width).plain


def test_the_hold_clock_runs_on_between_snapshots() -> None:
    """It counts up to what is required and no further; what is left of at_most counts down."""
    assert words(BARE, since_s=0.2).startswith("HOLD 0:42 of 1:00 continuous, at most 1:30 [")
    assert words(replace(BARE, elapsed_s=41.9), since_s=0.2).startswith("HOLD 0:42 of 1:00")
    assert words(replace(BARE, elapsed_s=59.95), since_s=0.2).startswith("HOLD 1:00 of 1:00")
    assert "at most 1:30 (0:47 left)" in words(HELD)


def test_a_clock_that_has_not_begun_says_what_it_waits_for() -> None:
    """The mean must enter the tolerance first; how often it began anew is told."""
    waits = replace(HELD, elapsed_s=0.0, inside=False, begun=False, restarts=2)
    assert words(waits, 120).startswith("HOLD 0:00 of 1:00 clock waits for ±1 % of 18.00 kV, restarted 2x, at most")
    assert words(waits, 120, since_s=0.3).startswith("HOLD 0:00")


def test_an_accumulating_clock_stands_outside_the_tolerance_and_in_a_pause() -> None:
    """What it has counted stays; it does not run on."""
    out = replace(HELD, clock="accumulate", inside=False)
    assert words(out, since_s=0.3).startswith("HOLD 0:42 of 1:00 OUT OF ±1 % of 18.00 kV: clock stands")
    paused = words(out, permission=Permission.PAUSING, phase=Phase.NONE)
    assert "accumulate, clock stands: arc pause" in paused


def test_a_clock_of_an_unknown_output_is_only_last_known() -> None:
    """S13: where no reading is vouched for the clock is not either, and stands."""
    text = words(BARE, since_s=9.0)
    assert text.startswith("HOLD 0:42 of 1:00 continuous, LAST KNOWN")
    assert "clock stands" in words(BARE, phase=Phase.RETREAT)


@pytest.mark.parametrize("width", range(20, 140, 7))
def test_the_clock_is_shortened_from_its_end(width: int) -> None:
    """Elapsed and required always come first."""
    text = words(replace(HELD, inside=False), width)
    assert text.startswith("HOLD 0:42 of 1:00 OUT OF")
    assert len(text) <= max(width, len("HOLD 0:42 of 1:00 OUT OF ±1 % of 18.00 kV: clock stands"))


def test_a_run_shows_step_readings_arcs_and_end() -> None:
    """What runs, how far it is and when it ends, in local time."""
    run = replace(RUN, arcs=2, arcs_allowed=10)
    text = "\n".join(line.plain for line in run_lines(replace(RUNNING, run=run), VIEW, 78, 8))
    for part in ("HOLD 0:42", "step 2/4 withstand: hold 18.00 kV", "next reading in 13 s", "arcs 2 of 10 allowed",
                 "0:38 to go, ends 14:04:00", "withstand.yaml", "S-1042", "bob", "runs/20251201T130204Z-3f2a91c7"):
        assert part in text


def test_no_countdown_runs_on_without_the_daemon() -> None:
    """S13: neither the next reading nor the end is counted down where nothing is known."""
    text = "".join(line.plain for line in run_lines(RUNNING, View(connected=False, since_s=2.0), 78, 8))
    assert "last known after 1:18" in text
    assert "to go" not in text
    assert "next reading" not in text


def test_what_is_at_most_left_is_told_as_such() -> None:
    """Where the plan's end is not known the longest is told, and an unknown plan only its time."""
    longest = replace(RUN, expected_s=None, hold=None)
    assert "1:06 left at most" in "".join(line.plain for line in run_lines(replace(RUNNING, run=longest), VIEW, 78, 3))
    direct = replace(longest, kind="direct", remaining_s=None)
    assert "for 1:18" in "".join(line.plain for line in run_lines(replace(RUNNING, run=direct), VIEW, 78, 3))


@pytest.mark.parametrize("state", STATES)
def test_no_more_lines_than_rows(state: str) -> None:
    """In every state and room."""
    snapshot, view = STATES[state]
    assert all(len(run_lines(snapshot, view, 78, rows)) <= rows for rows in range(9))


def test_with_one_row_the_weightiest_is_left() -> None:
    """The hold clock while it counts, the verdict after."""
    assert run_lines(RUNNING, VIEW, 78, 1)[0].plain.startswith("HOLD")
    assert run_lines(TRIPPED, VIEW, 78, 1)[0].plain.startswith("verdict: fail")


def test_an_ended_run_shows_its_verdict_and_no_clock() -> None:
    """After the trip the verdict stands first."""
    lines = [line.plain for line in run_lines(TRIPPED, VIEW, 78, 3)]
    assert lines[0].startswith("verdict: fail")
    assert "last run 3f2a91c7" in lines[1]
    assert "HOLD" not in "".join(lines)
    bare = run_lines(replace(IDLE, verdict_text="pass"), VIEW, 78, 3)
    assert [line.plain for line in bare] == ["verdict: pass", "no run"]
