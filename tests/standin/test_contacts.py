"""Contacts, the danger signal and what its disobedience means."""

import pytest

from hvhost.wire.vocabulary import Cause, Fitted, Inputs, McuState
from tests.standin.fakes import ALL, SETTINGS, Bench

OPENINGS = [(Inputs.INTERLOCK, Cause.INTERLOCK), (Inputs.EMERGENCY, Cause.EMERGENCY),
            (Inputs.GROUND_OPEN, Cause.GROUNDING), (Inputs.AUXILIARY, Cause.AUXILIARY)]


@pytest.mark.parametrize(("contact", "cause"), OPENINGS)
@pytest.mark.parametrize("state", ["WARNING", "ENERGISED", "LOWERING", "PAUSING"])
def test_a_contact_that_opens_trips_from_the_warning_to_the_cut(contact, cause, state):
    """Each contact has its own cause and acts within one sample period (PROTOCOL 10.10)."""
    bench = Bench()
    if state == "WARNING":
        bench.warned()
    else:
        bench.energised(pause=(3, 500, 10_000))
        if state == "LOWERING":
            bench.lower()
        if state == "PAUSING":
            bench.arc(bench.mcu.core.index)
    assert bench.state is McuState[state]
    bench.board.open(contact)
    bench.pass_ms(1)
    assert bench.dead
    assert bench.mcu.latched & cause


@pytest.mark.parametrize(("contact", "cause"), OPENINGS)
@pytest.mark.parametrize("state", ["REQUESTED", "PROVING"])
def test_a_contact_that_opens_before_the_warning_voids_without_a_latch(contact, cause, state):
    """Requested or proving: a cut, the arm is void, nothing latches (PROTOCOL 5.19)."""
    bench = Bench()
    if state == "PROVING":
        bench.board.forced[Inputs.DANGER] = False
    bench.arm()
    if state == "PROVING":
        bench.press()
    assert bench.state is McuState[state]
    bench.board.open(contact)
    bench.pass_ms(2)
    assert bench.state is McuState.OFF
    assert bench.dead
    assert not bench.mcu.core.armed
    assert not bench.mcu.latched


def test_an_open_interlock_with_the_output_off_is_a_status():
    """It blocks arming, is told as an input, and trips nothing (PROTOCOL 10.16)."""
    bench = Bench()
    bench.board.open(Inputs.INTERLOCK)
    bench.pass_ms(500)
    assert not bench.mcu.latched
    assert bench.event("inputs").b & Inputs.INTERLOCK
    assert bench.arm() == "interlock"


def test_a_contact_that_is_not_fitted_means_nothing():
    """Without an emergency contact in the settings its input is ignored."""
    bench = Bench(SETTINGS.with_(fitted=ALL & ~Fitted.EMERGENCY)).energised(v=0)
    bench.board.open(Inputs.EMERGENCY)
    bench.pass_ms(20)
    assert bench.state is McuState.ENERGISED


def test_supply_power_lost_while_energised_trips_even_if_it_comes_back():
    """The danger signal dark for 50 ms: a trip, for the power may return by itself (PROTOCOL 10.13)."""
    bench = Bench().energised(v=0)
    bench.board.power = False
    bench.pass_ms(49)
    assert bench.state is McuState.ENERGISED
    bench.pass_ms(3)
    assert bench.dead
    assert bench.mcu.latched == Cause.DANGER_DARK
    bench.board.power = True
    bench.pass_ms(500)
    assert bench.dead


def test_a_flicker_of_the_danger_signal_is_no_trip():
    """Dark for 40 ms is let pass (PROTOCOL 10.13)."""
    bench = Bench().energised(v=0)
    for _ in range(3):
        bench.board.forced[Inputs.DANGER] = False
        bench.pass_ms(40)
        bench.board.forced.clear()
        bench.pass_ms(40)
    assert bench.state is McuState.ENERGISED


def test_a_signal_still_lit_after_the_relay_dropped_is_power_still_on():
    """200 ms after the relay was dropped, in every state (PROTOCOL 10.14)."""
    bench = Bench().energised(v=0)
    bench.board.forced[Inputs.DANGER] = True
    bench.cut()
    bench.pass_ms(199)
    assert not bench.mcu.latched
    bench.pass_ms(3)
    assert bench.mcu.latched == Cause.POWER_STILL_ON


def test_a_signal_that_lights_by_itself_while_off_is_power_still_on():
    """Power without the relay is the same fault (PROTOCOL 10.14)."""
    bench = Bench()
    bench.board.forced[Inputs.DANGER] = True
    bench.pass_ms(250)
    assert bench.mcu.latched == Cause.POWER_STILL_ON


def test_a_signal_that_is_not_fed_by_the_relay_may_stay_lit():
    """Only where the relay feeds it does it have to go dark (PROTOCOL 10.14)."""
    bench = Bench(SETTINGS.with_(fitted=ALL & ~Fitted.DANGER_FROM_RELAY))
    bench.board.forced[Inputs.DANGER] = True
    bench.energised(v=0)
    bench.cut()
    bench.pass_ms(500)
    assert not bench.mcu.latched


def test_an_interlock_that_does_not_cut_the_power_latches():
    """200 ms after its opening the signal is still lit, though the MCU is off (PROTOCOL 10.15)."""
    bench = Bench(SETTINGS.with_(fitted=ALL & ~Fitted.DANGER_FROM_RELAY))
    bench.board.forced[Inputs.DANGER] = True
    bench.pass_ms(10)
    bench.board.open(Inputs.INTERLOCK)
    bench.pass_ms(199)
    assert not bench.mcu.latched
    bench.pass_ms(3)
    assert bench.mcu.latched == Cause.INTERLOCK_DID_NOT_CUT


def test_a_voltage_that_stays_after_the_interlock_opened_latches():
    """A readback above the bleed envelope from the opening: the loop did not cut (PROTOCOL 10.15)."""
    bench = Bench().energised()
    bench.board.v = 10_001
    bench.board.open(Inputs.INTERLOCK)
    bench.pass_ms(205)
    assert bench.mcu.latched == Cause.INTERLOCK | Cause.INTERLOCK_DID_NOT_CUT


def test_a_voltage_that_bleeds_after_the_interlock_opened_does_not():
    """A fall with the bleed time is what an opened loop leaves (PROTOCOL 10.15)."""
    bench = Bench().energised()
    bench.board.open(Inputs.INTERLOCK)
    bench.pass_ms(500)
    assert bench.mcu.latched == Cause.INTERLOCK


def test_bouncing_inputs_do_not_flood_the_line():
    """Changes of inputs are told at most every ten milliseconds."""
    bench = Bench()
    before = len(bench.events)
    for _ in range(200):
        bench.board.contacts ^= int(Inputs.POLARITY)
        bench.pass_ms(1)
    assert len(bench.events) - before <= 21
