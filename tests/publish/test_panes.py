"""The pieces of the screen."""

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish import panes
from hvhost.publish.snapshot import HoldView, InputJudgement, InputView, Reading, Severity
from hvhost.publish.wording import View
from tests.pictures.draw import ZONE
from tests.pictures.states import IDLE, INPUTS_OFF, RUN, RUNNING, TRIPPED

VIEW = View(zone=ZONE)


@given(st.text("ab ", max_size=200), st.integers(4, 40), st.integers(1, 5), st.sampled_from(["", "!! "]))
def test_wrapping_keeps_to_its_room(text: str, width: int, most: int, mark: str) -> None:
    """No more lines than allowed, none wider unless a single word is."""
    lines = panes.wrapped(text, width, most, mark)
    assert 1 <= len(lines) <= most
    longest = max(map(len, text.split()), default=0)
    assert all(len(line) <= max(width, longest + len(mark)) for line in lines)


def test_wrapping_marks_what_it_left_out() -> None:
    """A reader sees that there is more."""
    assert panes.wrapped("one two three four", 8, 1) == ["one two…"]
    assert panes.wrapped("one two", 20, 2, "ok ") == ["ok one two"]


def test_bars_show_readback_set_point_limit_and_room() -> None:
    """The margin to the limit is a number and a distance."""
    volts, amps = (line.plain for line in panes.bars(RUNNING, VIEW, 80))
    assert "set 18.00 kV  ceiling 20.00 kV  room 2.00 kV" in volts
    assert "set 2.000 mA  trip 3.000 mA  room 2.975 mA" in amps
    bar = volts[volts.index("[") + 1: volts.index("]")]
    assert bar.index("S") < bar.index("L")
    assert bar.count("█") == pytest.approx(18 / 25 * len(bar), abs=1.5)


def test_a_limit_that_is_passed_is_said_in_words() -> None:
    """Above the trip level the margin reads 'OVER by'."""
    over = replace(RUNNING, reading=Reading(volts=1.0, amps=3.4e-3, age_s=0.01))
    assert "OVER by 0.400 mA" in panes.bars(over, VIEW, 80)[1].plain


def test_an_unknown_output_shows_no_number() -> None:
    """S13: neither large digits nor bars nor the reading line hold a value."""
    gone = replace(RUNNING, reading=replace(RUNNING.reading, age_s=2.0))
    text = "\n".join(line.plain for line in (*panes.readbacks(gone, VIEW, 80, 5), *panes.bars(gone, VIEW, 80),
                                             panes.reading_line(gone, VIEW)))
    assert "kV: output unknown - use the" in text
    assert "emergency switching off" in text
    assert "█" not in text
    assert "17.9" not in text


def test_flags_and_age_stand_beside_the_reading() -> None:
    """A reading at the converter's limit or of the wrong sign says so."""
    flagged = replace(RUNNING, reading=replace(RUNNING.reading, flags=("limit I", "reversed")))
    text = panes.reading_line(flagged, VIEW).plain
    assert "age 0.04 s" in text
    assert "LIMIT I  REVERSED" in text


def test_inputs_that_hinder_come_first_by_name() -> None:
    """An open interlock is the first thing in the list, with a mark and not a colour."""
    inputs = (*INPUTS_OFF[1:], replace(INPUTS_OFF[0], state="open", judgement=InputJudgement.NOT_OK),
              InputView(name="door", state="unknown"))
    many = [line.plain for line in panes.inputs(replace(IDLE, inputs=inputs), 40, 12)]
    assert many[0] == "!! interlock open"
    assert "?? door unknown" in many
    few = [line.plain for line in panes.inputs(replace(IDLE, inputs=inputs), 78, 4)]
    assert few[0] == "!! interlock open"
    assert few[1] == "?? door unknown"
    assert few[2].startswith("ok emergency contact closed")
    assert len(few) == 4


def test_the_hold_clock_runs_on_and_stands_when_out_of_tolerance() -> None:
    """Between snapshots the clock moves; outside the tolerance it stands and says so."""
    hold = HoldView(elapsed_s=42.0, required_s=60.0, at_most_s=90.0)
    assert panes.hold_clock(hold, 1.5, 80).plain.startswith("HOLD 0:43 of 1:00 continuous, at most 1:30 [")
    out = panes.hold_clock(replace(hold, inside=False), 1.5, 80).plain
    assert out.startswith("HOLD 0:42 of 1:00 OUT OF TOLERANCE: clock stands, at most 1:30")
    assert panes.hold_clock(hold, 99.0, 80).plain.startswith("HOLD 1:00 of 1:00")


def test_a_run_shows_step_readings_arcs_and_end() -> None:
    """What runs, how far it is and when it ends, in local time."""
    run = replace(RUN, arcs=2, arcs_allowed=10)
    text = "\n".join(line.plain for line in panes.run_lines(replace(RUNNING, run=run), VIEW, 70, 8))
    for words in ("HOLD 0:42", "step 2/4 withstand: hold 18.00 kV", "next reading in 13 s", "arcs 2 of 10 allowed",
                  "0:38 left, ends 14:04:00", "withstand.yaml", "S-1042", "bob", "runs/20251201T130204Z-3f2a91c7"):
        assert words in text


def test_an_ended_run_shows_its_verdict_and_no_clock() -> None:
    """After the trip the verdict stands first."""
    lines = [line.plain for line in panes.run_lines(TRIPPED, VIEW, 78, 3)]
    assert lines[0].startswith("verdict: fail")
    assert "last run 3f2a91c7" in lines[1]
    assert "HOLD" not in "".join(lines)
    bare = panes.run_lines(replace(IDLE, verdict_text="pass"), VIEW, 78, 3)
    assert [line.plain for line in bare] == ["verdict: pass", "no run"]


def test_events_carry_local_time_and_marks() -> None:
    """The newest lines, a trip marked with two exclamation marks."""
    lines = [line.plain for line in panes.events(TRIPPED, VIEW, 3)]
    assert len(lines) == 3
    assert "!! BREAKDOWN" in lines[0]
    assert lines[0].startswith(" 14:03:14.160")
    assert panes.events(TRIPPED, VIEW, 0) == []
    assert panes.EVENT_MARKS[Severity.TRIP] == "!!"


def test_the_seat_the_record_and_the_losses_are_named() -> None:
    """Who has control, whether the recorder keeps up, what the link and the outlets lost."""
    text = panes.health(RUNNING).plain
    for words in ("control bob", "record ok 1.9 MB", "garbled 1", "gaps 0", "missed 3", "lost 0"):
        assert words in text
    assert "control free" in panes.health(replace(RUNNING, seat="")).plain


def test_the_footer_names_the_keys_or_says_that_there_are_none() -> None:
    """S7: a view that cannot stop says so."""
    assert "cut at once" in panes.footer(VIEW, 80).plain
    assert "l: lower" in panes.footer(VIEW, 120).plain
    assert "CANNOT STOP" in panes.footer(View(can_stop=False), 80).plain
    assert "CANNOT STOP NOW" in panes.footer(View(connected=False), 80).plain


def test_a_key_note_takes_the_place_of_the_next_acts() -> None:
    """What the last key led to is read where the eye already is."""
    assert panes.next_line(RUNNING, VIEW).plain == " next: hvhost lower  |  hvhost cut"
    assert panes.next_line(RUNNING, View(note="cut sent by this key")).plain == " cut sent by this key"
