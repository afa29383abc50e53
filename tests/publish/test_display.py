"""The page for the display beside the arm input."""

from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from rich.cells import cell_len

from hvhost.bench import cautions
from hvhost.publish.display import PRESS, bench_display
from hvhost.publish.wording import View
from tests.pictures.draw import ZONE
from tests.pictures.states import INPUTS_OFF, NOT_OK, STATES

SIZES = [(80, 24), (120, 40), (200, 60)]
REQUESTED = STATES["requested"][0]
VIEW = View(zone=ZONE)


def text(snapshot, view: View = VIEW, size: tuple[int, int] = (80, 24)) -> str:
    """The page as one text."""
    return " ".join(" ".join(line.plain for line in bench_display(snapshot, view, *size)).split())


@given(st.sampled_from(sorted(STATES)), st.integers(10, 220), st.integers(1, 70))
@settings(max_examples=60)
def test_every_state_fits_every_display(state: str, width: int, height: int) -> None:
    """Exactly ``height`` lines, none wider than ``width``."""
    snapshot, view = STATES[state]
    lines = bench_display(snapshot, view, width, height)
    assert len(lines) == height
    assert all(cell_len(line.plain) <= width for line in lines)


@pytest.mark.parametrize("size", SIZES)
def test_an_open_request_is_named_whole(size: tuple[int, int]) -> None:
    """Plan, specimen, highest voltage, duration, who asked, time left, and what pressing means."""
    words = text(REQUESTED, size=size)
    for part in ("REQUEST TO ENERGISE", "plan withstand.yaml", "specimen S-1042", "highest voltage", "for 2:26 at most",
                 "asked by bob (pid 4211)", "press within", PRESS, "THIS DISPLAY CANNOT ARM"):
        assert part in words
    assert "█" in words


def test_voltage_and_time_left_are_drawn_large_with_their_units() -> None:
    """Read from the arm input: five rows at 80x24, more on a larger display."""
    lines = [line.plain for line in bench_display(REQUESTED, View(zone=ZONE), 80, 24)]
    assert any(line.rstrip().endswith(" s") and " kV" in line for line in lines)
    assert sum("█" in line for line in lines) >= 8


def test_the_time_left_counts_down_between_snapshots() -> None:
    """Below 100 columns a number that has no room is written small, and still counts."""
    tiny = text(REQUESTED, View(zone=ZONE, since_s=0.4), (30, 12))
    assert "26 s" in tiny
    assert "18.00 kV" in tiny


def test_what_hinders_is_named_beside_the_arm_input() -> None:
    """Whoever is about to press sees why nothing would happen."""
    hindered = replace(REQUESTED, inputs=(replace(INPUTS_OFF[0], state="open", judgement=NOT_OK), *INPUTS_OFF[1:]))
    assert "!! hinders arming: interlock open" in text(hindered)


def test_without_an_arm_input_no_press_is_asked_for() -> None:
    """The page says so and does not tell anyone to press."""
    words = text(STATES["requested without arm input"][0])
    assert cautions.NO_ARM_INPUT in words
    assert "press the arm input" not in words
    assert "stands for" in words


def test_a_rehearsal_is_told() -> None:
    """Nobody takes a stand-in for a bench."""
    arm = REQUESTED.arm
    assert arm is not None
    assert "the press may be simulated" in text(replace(REQUESTED, rehearsal=True, arm=replace(
        arm, simulated_press=True)))


@pytest.mark.parametrize("size", SIZES)
def test_otherwise_it_shows_state_and_cautions(size: tuple[int, int]) -> None:
    """State, voltage, readings, alerts and the whole caution; never a word of safety."""
    words = text(STATES["tripped"][0], size=size)
    for part in ("TRIPPED: breakdown", "VOLTAGE FALLING", cautions.BEFORE_TOUCHING, "THIS DISPLAY CANNOT ARM"):
        assert part in words
    assert "WILL RE-ENERGISE in 7 s" in text(STATES["pausing"][0], size=size)
    assert "OUTPUT UNKNOWN" in text(STATES["lost"][0], size=size)


def test_a_request_that_is_not_vouched_for_is_not_shown() -> None:
    """S13: with the daemon gone nobody is asked to press."""
    words = text(REQUESTED, View(zone=ZONE, connected=False, since_s=3.0))
    assert "REQUEST TO ENERGISE" not in words
    assert "DAEMON GONE" in words
    assert "NOR STOP" in words


def test_keys_stop_here_too_where_there_are_keys() -> None:
    """S7: the page says what its keys do, or that it cannot stop."""
    assert "SPACE or c: cut at once" in text(REQUESTED)
    assert "NOR STOP: use the emergency switching off" in text(REQUESTED, View(zone=ZONE, can_stop=False))
