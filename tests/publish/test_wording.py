"""Words and numbers of the views."""

import math
from dataclasses import replace
from datetime import timedelta, timezone

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.bench import cautions
from hvhost.publish import wording
from hvhost.publish.snapshot import ArmView, DiskView, LinkState, Permission, Phase, StopState, VoltageState
from hvhost.publish.wording import Scale, View, fine, left, measured, span
from tests.pictures.states import IDLE, NOW_NS, RUNNING, STATES, TRIPPED

ZONE = timezone(timedelta(hours=5, minutes=30), "IST")


@pytest.mark.parametrize(("full", "unit", "polarity", "value", "text"), [
    (25e3, "V", 1, 18_019.0, "18.02 kV"), (25e3, "V", -1, 18_019.0, "-18.02 kV"), (25e3, "V", 1, -40.0, "-0.04 kV"),
    (25e3, "V", 1, 0.0, "0.00 kV"), (25e3, "V", -1, 0.2, "0.00 kV"), (5e3, "V", -1, 3998.0, "-3.998 kV"),
    (4e-3, "A", 1, 24.6e-6, "0.025 mA"), (20e-3, "A", 1, 0.0113, "11.30 mA"), (500.0, "V", 1, 60.0, "60.0 V"),
    (100e3, "V", 1, 99_950.0, "100.0 kV"), (0.0, "V", 1, 3.0, "3.000 V"), (4e-9, "A", 1, 1e-9, "1.000 nA"),
])
def test_a_readback_has_the_decimals_of_its_full_scale(full: float, unit: str, polarity: int, value: float,
                                                       text: str) -> None:
    """Four digits of the full scale, the bench's sign, and no minus before nothing."""
    assert Scale(full, unit, polarity).text(value) == text


def test_nothing_is_two_dashes() -> None:
    """A value that is not known is not shown as zero."""
    scale = Scale(25e3, "V", 1)
    assert scale.text(None) == scale.text(math.nan) == scale.size(None) == fine(None, "V") == span(None) == "--"


@pytest.mark.parametrize(("value", "text"), [
    (24.61e-6, "24.61 µA"), (1e-3, "1.000 mA"), (0.0, "0 A"), (-3.2e-9, "-3.200 nA"), (0.99999, "1.000 A"),
    (2e-12, "0.002 nA"), (123456.0, "123.5 kA"),
])
def test_a_fine_value_chooses_its_prefix(value: float, text: str) -> None:
    """Small currents are read in their own unit."""
    assert fine(value, "A") == text


# JCGM 100 (GUM), 7.2.6: uncertainty to two digits at most, the value to the same decimal place.
@pytest.mark.parametrize(("value", "u", "text"), [
    (17_996.0, 26.0, "(17.996 ± 0.052) kV"), (612.0, 8.6, "(612 ± 17) V"), (-12.0, 8.0, "(-12 ± 16) V"),
    (1130.0, 1.1, "(1.1300 ± 0.0022) kV"), (0.0, 8.0, "(0 ± 16) V"), (5.0, None, "5.000 V, U not known"),
    (5.0, 0.0, "5.000 V, U not known"), (5.0, 4000.0, "(0.0 ± 8.0) kV"),
])
def test_a_value_is_shown_to_the_second_digit_of_its_uncertainty(value: float, u: float | None, text: str) -> None:
    """Expanded with k = 2, in one unit for both."""
    assert measured(value, u, "V") == text


@given(st.floats(allow_nan=True, allow_infinity=True), st.none() | st.floats(), st.sampled_from([1, -1]))
def test_any_number_can_be_written(value: float, u: float | None, polarity: int) -> None:
    """No value that a broken chain could yield breaks a view."""
    for text in (fine(value, "V", polarity), measured(value, u, "V", polarity), Scale(value, "V", polarity).text(u),
                 span(value), left(value)):
        assert text.isprintable()
        assert text


def test_spans_and_countdowns() -> None:
    """Elapsed time is rounded down; a countdown is rounded up, so that it never says 0 too early."""
    assert (span(0.9), span(61.0), span(3723.5), span(-5.0)) == ("0:00", "1:01", "1:02:03", "0:00")
    assert (left(0.1), left(2.0), left(-1.0)) == ("1 s", "2 s", "0 s")


def test_times_are_local_with_offset_and_zone() -> None:
    """A reader elsewhere can tell what the time meant."""
    assert wording.clock_text(NOW_NS, ZONE) == "2025-12-01 18:33:22 +05:30 IST"
    assert wording.clock_text(NOW_NS, None)
    assert wording.local_time(NOW_NS, None)


@pytest.mark.parametrize(("changes", "words"), [
    ({}, "IDLE"), ({"permission": Permission.RUNNING, "phase": Phase.RAMP}, "RUNNING: RAMP"),
    ({"permission": Permission.PAUSING}, "PAUSING"), ({"latched": ("overcurrent",)}, "TRIPPED"),
    ({"permission": Permission.LOWERING, "latched": ("host silent",)}, "TRIPPED, LOWERING"),
    ({"link": LinkState.LOST, "permission": Permission.RUNNING}, "LAST KNOWN: RUNNING"),
])
def test_the_state_is_named_in_the_words_of_the_trade(changes: dict[str, object], words: str) -> None:
    """One word, one meaning; what is only remembered says so."""
    assert wording.state_words(replace(IDLE, **changes), View()) == words


def test_a_gone_daemon_leaves_only_what_was_last_known() -> None:
    """Neither voltage nor power nor set-point nor inputs are vouched for."""
    view = View(connected=False)
    shown = wording.as_last_known(RUNNING, view)
    assert wording.state_words(shown, view) == "LAST KNOWN: RUNNING: HOLD"
    assert (shown.voltage, shown.power_words, shown.set_volts) == (VoltageState.UNKNOWN, "", None)
    assert {str(one.judgement) for one in shown.inputs} == {"unknown"}
    assert wording.as_last_known(RUNNING, View()) is RUNNING


@pytest.mark.parametrize(("age_s", "since_s", "old", "unknown"), [
    (0.01, 0.0, False, False), (0.07, 0.0, True, False), (0.51, 0.0, True, True), (0.04, 0.2, False, False),
    (0.04, 0.3, True, False), (0.2, 0.31, True, True), (0.01, 0.51, True, True),
])
def test_an_old_reading_is_old_and_an_older_one_is_unknown(age_s: float, since_s: float, old: bool,
                                                           unknown: bool) -> None:
    """S13: beyond two blocks (64 ms) old, beyond the lease (500 ms) not shown; an overdue snapshot counts too."""
    reading = replace(RUNNING.reading, age_s=age_s)
    snapshot, view = replace(RUNNING, reading=reading), View(since_s=since_s)
    assert wording.reading_old(snapshot, view) is old
    assert wording.output_unknown(snapshot, view) is unknown


@pytest.mark.parametrize("link", [LinkState.NONE, LinkState.LOST])
def test_without_a_link_the_output_is_unknown(link: LinkState) -> None:
    """A reading from before the link was lost is not shown as present."""
    assert wording.output_unknown(replace(RUNNING, link=link), View())


def test_the_most_urgent_alert_comes_first() -> None:
    """An unknown output before everything, then the cut that was not confirmed, then what will happen by itself."""
    snapshot = replace(TRIPPED, reading=None, stop=StopState.CUT_NOT_CONFIRMED, pause_s=3.2, warning_s=1.1)
    assert wording.alerts(snapshot, View()) == [
        cautions.OUTPUT_UNKNOWN.upper(), cautions.CUT_NOT_CONFIRMED.upper(), "WILL RE-ENERGISE in 4 s",
        "WARNING: energises in 2 s", "TRIPPED: breakdown"]


def test_an_open_request_asks_for_the_press_or_the_typed_name() -> None:
    """S1: whoever stands at the bench reads what is asked of him and until when."""
    arm = ArmView(plan="p", specimen="s", volts_highest=1.0, duration_s=1.0, asked_by="bob", expires_s=20.5)
    pressed = wording.alerts(replace(IDLE, arm=arm), View(since_s=0.2))[0]
    assert pressed == "REQUESTED: PRESS THE ARM INPUT AT THE BENCH within 21 s"
    typed = wording.alerts(replace(IDLE, arm=replace(arm, press_needed=False, typed_name="p s")), View())[0]
    assert "type 'p s' to arm" in typed
    assert cautions.NO_ARM_INPUT in typed


@pytest.mark.parametrize("state", [name for name, (snapshot, _) in STATES.items()
                                   if snapshot.permission in (Permission.IDLE, Permission.LOWERING)])
def test_the_caution_stands_whenever_someone_may_go_in(state: str) -> None:
    """S6: with nothing energised the whole caution is there; no view says that a circuit is safe."""
    text = wording.caution(STATES[state][0])
    assert cautions.BEFORE_TOUCHING in text
    assert "safe" not in text.replace("unsafe", "")


def test_the_caution_says_how_many_bleed_times_have_passed() -> None:
    """S6: the number of bleed times, the discharge's own words, and that a contact is no proof."""
    grounded = replace(IDLE, voltage=VoltageState.GROUNDED, voltage_text="", discharge_text="Not measured.")
    text = wording.caution(grounded)
    assert text.startswith("14.2 bleed times since the cut. Not measured. 'Grounded' is the position of a contact")
    assert wording.caution(replace(IDLE, discharge_text=cautions.BEFORE_TOUCHING)).count("Before touching") == 1
    assert wording.caution(RUNNING) == ""


def test_the_discharge_says_nothing_twice() -> None:
    """A contact's position is called no proof once; a reason that ends in a stop gets no second one."""
    grounded = replace(IDLE, voltage=VoltageState.GROUNDED,
                       voltage_text="grounding device's contact says closed: a position, not a proof")
    assert wording.caution(grounded).count("proof") == 1
    stopped = wording.caution(replace(IDLE, voltage_text="the voltage rose again."))
    assert ".." not in stopped
    lowering = replace(RUNNING, permission=Permission.LOWERING, voltage_text="the output is being lowered")
    assert wording.caution(lowering).startswith("Voltage present: the output is being lowered. Before touching")


def test_nothing_to_come_is_vouched_for_where_the_output_is_unknown() -> None:
    """S13: the course goes with the reading."""
    assert RUNNING.course
    gone = wording.as_last_known(RUNNING, View(connected=False))
    assert gone.course == ()
    assert gone.next_acts[0] == "use the emergency switching off"


def test_who_has_control_and_who_stopped_them() -> None:
    """A stop by someone else stands beside the name until it is acknowledged."""
    assert wording.seat_words(replace(IDLE, seat="")) == "control free"
    assert wording.seat_words(replace(IDLE, seat="bob", stopped_by="alice")) == (
        "control bob, stopped by alice, not acknowledged")


@pytest.mark.parametrize(("seconds", "text"), [(0.0, "0 ms"), (-0.063, "63 ms"), (0.99, "990 ms"), (7.4, "7 s"),
                                               (59.4, "59 s"), (59.6, "1:00"), (77.0, "1:17"), (7500.0, "2:05:00")])
def test_short_spans(seconds: float, text: str) -> None:
    """An axis is labelled in what suits it."""
    assert wording.minutes(seconds) == text


def test_a_disk_that_is_nearly_full_is_an_alert() -> None:
    """It ends runs, so it is seen before one is opened."""
    full = replace(IDLE, disk=DiskView(free_b=312e6, floor_b=500e6, ok=False))
    assert wording.alerts(full, View()) == ["DISK NEARLY FULL: 312 MB free, a run needs 500 MB"]
    assert wording.bytes_text(None) == "--"
    assert wording.bytes_text(84.4e9) == "84.4 GB"


def test_what_could_move_a_cursor_is_made_visible() -> None:
    """A specimen's name cannot write elsewhere on the screen."""
    assert wording.printable("S-1\x1b[2J\n") == "S-1?[2J?"


def test_wiring_that_does_not_inhibit_without_the_mcu_is_said_on_every_screen() -> None:
    """S4's exception stands among the alerts as long as the bench file states it."""
    assert wording.alerts(replace(IDLE, inhibits_without_mcu=False), View()) == [
        "the wiring does not inhibit when the MCU is absent or in reset"]
