"""The pieces of the screen."""

from dataclasses import replace

import pytest

from hvhost.publish import panes
from hvhost.publish.snapshot import InputJudgement, InputView, LoopView, OutletView, Permission, Reading, Severity
from hvhost.publish.wording import View
from tests.pictures.draw import ZONE
from tests.pictures.states import IDLE, INPUTS_OFF, RUNNING, TRIPPED

VIEW = View(zone=ZONE)


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
    assert many[0] == "!! hinders arming: interlock open"
    assert "?? door unknown" in many
    few = [line.plain for line in panes.inputs(replace(IDLE, inputs=inputs), 78, 4)]
    assert few[0] == "!! hinders arming: interlock open"
    assert few[1] == "?? door unknown"
    assert few[2].startswith("ok emergency contact closed")
    assert len(few) == 4
    flowing = panes.inputs(IDLE, 78, 12, listed=False)
    assert len(flowing) == 3
    running = replace(IDLE, inputs=inputs, permission=Permission.RUNNING)
    assert panes.inputs(running, 78, 4)[0].plain == "!! NOT AS IT MUST BE: interlock open"


def test_events_carry_local_time_and_marks() -> None:
    """The newest lines, a trip marked with two exclamation marks."""
    lines = [line.plain for line in panes.events(TRIPPED, VIEW, 80, 3)]
    assert len(lines) == 3
    assert "!! BREAKDOWN" in lines[0]
    assert lines[0].startswith(" 14:03:14.160")
    assert panes.events(TRIPPED, VIEW, 80, 0) == []
    assert panes.EVENT_MARKS[Severity.TRIP] == "!!"


def test_a_long_event_is_folded_and_the_newest_comes_first_to_its_room() -> None:
    """What a guard said is read whole; where rows are few the newest line has them."""
    long = replace(TRIPPED.events[-1], text="word " * 30, number=99)
    snapshot = replace(TRIPPED, events=(*TRIPPED.events, long))
    lines = [line.plain for line in panes.events(snapshot, VIEW, 80, 4)]
    assert len(lines) == 4
    assert "cut 4 confirmed" in lines[0]
    assert not any(line.endswith("…") for line in lines)
    assert " ".join(lines[1:]).count("word") == 30
    assert panes.events(snapshot, VIEW, 80, 1)[0].plain.endswith("…")


def test_the_seat_the_record_and_the_losses_are_named() -> None:
    """Who has control, whether the recorder keeps up, what the link and the outlets lost, how late the daemon was."""
    worse = replace(RUNNING, outlets=(OutletView(name="local", dropped=3, failed=1),), loop=LoopView(recent_s=0.021))
    text = panes.health(worse, 120, 1)[0].plain
    for words in ("control bob", "record ok 1.9 MB", "garbled 1", "missed 3", "lost by outlets 4", "late by 21 ms"):
        assert words in text
    assert "gaps" not in text
    assert "control free" in panes.health(replace(IDLE, seat=""), 80, 1)[0].plain
    assert "nothing lost" in panes.health(IDLE, 80, 1)[0].plain
    stopped = panes.health(replace(RUNNING, stopped_by="alice"), 80, 2)
    assert "stopped by alice, not acknowledged" in stopped[0].plain


def test_a_state_that_does_not_fit_is_folded_not_clipped() -> None:
    """At 80 columns voltage, cut and power are all read; a link as it should be gives way first."""
    long = replace(TRIPPED, power_words="programmed to zero, supply still powered",
                   latched=("host: readback missing",), permission=Permission.LOWERING)
    lines = [line.plain for line in panes.state_lines(long, VIEW, 80, 2)]
    assert len(lines) == 2
    text = " ".join(" ".join(lines).split())
    assert text == ("TRIPPED, LOWERING VOLTAGE FALLING · cut confirmed programmed to zero, supply still powered")
    assert panes.state_lines(RUNNING, VIEW, 80, 2)[0].plain.endswith("link greeted")


def test_the_footer_names_the_keys_or_says_that_there_are_none() -> None:
    """S7: a view that cannot stop says so."""
    assert "cut at once" in panes.footer(VIEW, 80).plain
    assert "l: lower" in panes.footer(VIEW, 120).plain
    assert "CANNOT STOP" in panes.footer(View(can_stop=False), 80).plain
    assert "CANNOT STOP NOW" in panes.footer(View(connected=False), 80).plain


def test_the_footer_names_every_key_where_there_is_room() -> None:
    """Plot and bell too, the bell with its state; the stop keys stand in every width."""
    assert "t: plot  b: bell on  q" in panes.footer(VIEW, 80).plain
    assert "b: bell silent" in panes.footer(View(bell=False), 80).plain
    for width in (40, 80, 100, 140):
        assert len(panes.footer(VIEW, width).plain) <= width
        assert "cut" in panes.footer(VIEW, width).plain


def test_a_key_note_takes_the_place_of_the_next_acts() -> None:
    """What the last key led to is read where the eye already is; many acts are folded between them."""
    assert panes.next_lines(RUNNING, VIEW, 80, 1)[0].plain == " next: hvhost lower  |  hvhost cut"
    noted = panes.next_lines(RUNNING, View(note="cut sent by this key: cut 12 sent"), 80, 1)
    assert noted[0].plain == " cut sent by this key: cut 12 sent"
    many = panes.next_lines(replace(RUNNING, next_acts=("a" * 50, "b" * 50)), VIEW, 80, 2)
    assert [line.plain for line in many] == [f" next: {'a' * 50}", f" {'b' * 50}"]
    assert panes.next_lines(replace(RUNNING, next_acts=()), VIEW, 80, 1)[0].plain == ""
