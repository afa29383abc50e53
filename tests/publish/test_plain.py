"""The view in lines."""

from dataclasses import replace

import pytest

from hvhost.bench import cautions
from hvhost.publish.plain import PlainFollower, brief, reading_words, status_lines
from hvhost.publish.snapshot import CoursePoint, Permission, Phase
from hvhost.publish.wording import View
from tests.pictures.draw import ZONE
from tests.pictures.states import IDLE, RUNNING, STATES, TRIPPED

VIEW = View(zone=ZONE)


def test_the_status_says_everything_that_matters() -> None:
    """State, reading, set-point, limits, inputs by name, control, record, link, next acts."""
    text = "\n".join(status_lines(RUNNING, VIEW))
    for words in ("RUNNING: HOLD; voltage present; power on; link greeted", "(17.996 ± 0.052) kV", "set-point 18.00 kV",
                  "ceiling 20.00 kV", "trip 3.000 mA", "ok interlock closed", "control bob", "record: ok 1.9 MB",
                  "garbled 1, gaps 0, missed 3, repeated 0", "HOLD 0:42 of 1:00 continuous",
                  "to come: 18.00 kV in 18 s, 0.00 kV in 27 s", "outlet local: lost 0", "next: hvhost cut",
                  "withstand.yaml"):
        assert words in text


@pytest.mark.parametrize("state", STATES)
def test_every_state_has_its_lines(state: str) -> None:
    """No state breaks the lines, each is printable, and the caution stands where someone may go in."""
    snapshot, view = STATES[state]
    lines = status_lines(snapshot, replace(view, zone=ZONE))
    assert all(line.isprintable() for line in lines)
    if snapshot.permission is Permission.IDLE:
        assert cautions.BEFORE_TOUCHING in lines[-1]
    assert brief(snapshot, view).isprintable()


def test_the_status_tells_the_last_arc_and_an_open_request() -> None:
    """What a picture shows is told in words too."""
    text = "\n".join(status_lines(TRIPPED, VIEW))
    assert "last trip: snapshot 4 breakdown, at most 18.01 kV and 1.552 mA" in text
    asked = "\n".join(status_lines(STATES["requested"][0], VIEW))
    assert "request: REQUEST: withstand.yaml, specimen S-1042, highest 18.00 kV" in asked
    long = replace(RUNNING, course=tuple(CoursePoint(1078.0 + n, 1e3 * n) for n in range(9)))
    assert "3.00 kV in 3 s, 4.00 kV in 4 s, and 4 more" in "\n".join(status_lines(long, VIEW))


def test_an_old_reading_and_an_unknown_one_are_told_apart() -> None:
    """S13 in words."""
    old = replace(RUNNING, reading=replace(RUNNING.reading, age_s=0.2))
    assert reading_words(old, VIEW).startswith("OLD (17.996")
    gone = replace(RUNNING, reading=replace(RUNNING.reading, age_s=0.9))
    assert reading_words(gone, VIEW) == "output unknown - use the emergency switching off"


def test_a_brief_line_has_the_sign_and_the_hold_clock() -> None:
    """One line for a log: local time, state, reading, step."""
    line = brief(STATES["negative bench"][0], VIEW)
    assert line.startswith("2025-12-01 14:03:22 +01:00 CET  RUNNING: HOLD; voltage present; (-3.998 ± 0.024) kV")
    assert "set -4.000 kV" in line
    assert "hold 0:42 of 1:00" in line


def test_events_are_printed_once_and_states_when_they_change() -> None:
    """The same snapshot adds nothing; a new event, a new state or five seconds do."""
    lines = PlainFollower()
    first = lines.lines(RUNNING, VIEW, 0.0)
    assert len(first) == len(RUNNING.events) + 1
    assert lines.lines(RUNNING, VIEW, 0.2) == []
    assert len(lines.lines(RUNNING, VIEW, 5.0)) == 1
    changed = lines.lines(replace(RUNNING, phase=Phase.RAMP), VIEW, 5.2)
    assert "RUNNING: RAMP" in changed[0]
    trip = lines.lines(replace(TRIPPED, events=(replace(TRIPPED.events[-1], number=99),)), VIEW, 5.4)
    assert trip[0].startswith("14:03:17.620")
    assert trip[-1] == "## TRIPPED: breakdown"


def test_the_lines_end_in_a_state_even_when_idle() -> None:
    """A bench at rest is one line."""
    assert "IDLE; voltage below threshold" in PlainFollower().lines(IDLE, VIEW, 0.0)[-1]
