"""Relay, interlock, emergency contact, arm input, grounding device and their read-backs, in time."""

from dataclasses import replace
from itertools import pairwise

import pytest

from hvhost.standin.panel import Wiring
from hvhost.standin.params import ContactParams
from hvhost.wire.vocabulary import Inputs

PARAMS = ContactParams()
READY = (Inputs.INTERLOCK | Inputs.EMERGENCY | Inputs.GROUND_OPEN | Inputs.AUXILIARY | Inputs.INHIBIT_BACK
         | Inputs.POLARITY)


def fresh(**faults: float) -> Wiring:
    """Wiring with these faults on (underscores for hyphens)."""
    contacts = Wiring(PARAMS, 1)
    contacts.settle({name.replace("_", "-"): value for name, value in faults.items()})
    return contacts


def closed(contacts: Wiring) -> Wiring:
    """The same with the relay driven and given its time."""
    contacts.drive(0.0, True, True, True, 2e-4)
    contacts.move(0.1)
    return contacts


def levels(contacts: Wiring, bit: Inputs, times: list[float]) -> list[bool]:
    """The level of one input at these times."""
    seen = []
    for t_s in times:
        contacts.move(t_s)
        seen.append(bool(contacts.bits & bit))
    return seen


def test_at_rest_everything_is_safe_and_ready() -> None:
    """Without an MCU the wiring inhibits, the relay is open, the signal is dark."""
    assert fresh().bits == READY


def test_relay_needs_its_operate_and_release_times() -> None:
    """The read-back and the danger signal follow the relay, not the command."""
    contacts = fresh()
    contacts.drive(0.0, True, True, True, 2e-4)
    assert levels(contacts, Inputs.RELAY_BACK, [0.007, 0.009]) == [False, True]
    assert contacts.bits & Inputs.DANGER
    contacts.drive(0.1, True, True, False, 2e-4)
    assert levels(contacts, Inputs.DANGER, [0.104, 0.106]) == [True, False]


def test_inhibit_reaches_the_output_stage_after_its_delay() -> None:
    """The read-back is taken at the supply."""
    contacts = fresh()
    contacts.drive(0.0, False, False, False, 2e-4)
    assert levels(contacts, Inputs.INHIBIT_BACK, [1e-4, 3e-4]) == [True, False]
    assert not contacts.clear


def test_without_a_relay_the_supply_has_power_as_long_as_the_contactor_is_closed() -> None:
    """The signal burns after a cut too; only the interlock's contactor takes the power."""
    contacts = Wiring(replace(PARAMS, relay=False), 1)
    assert contacts.power
    assert contacts.bits & Inputs.DANGER
    assert not contacts.bits & Inputs.RELAY_BACK
    contacts.set_interlock(0.0, False)
    contacts.move(0.1)
    assert not contacts.power


def test_without_an_inhibit_the_output_stage_knows_the_words_only() -> None:
    """Programming alone: nothing inhibits, whatever the MCU drives, and no read-back shows it."""
    contacts = Wiring(replace(PARAMS, inhibit=False), 1)
    contacts.drive(0.0, True, True, False, 2e-4)
    contacts.move(0.1)
    assert not contacts.inhibit
    assert not contacts.bits & Inputs.INHIBIT_BACK


def test_interlock_drops_the_power_by_itself_and_latches() -> None:
    """The hard-wired contactor opens without the MCU, closing the loop gives nothing back, a reset outside does."""
    contacts = closed(fresh())
    contacts.set_interlock(0.2, False)
    assert levels(contacts, Inputs.DANGER, [0.21, 0.23]) == [True, False]
    assert not contacts.outside_reset()
    contacts.set_interlock(0.3, True)
    contacts.move(0.4)
    assert not contacts.power
    assert contacts.outside_reset()
    assert contacts.power


def test_a_flick_of_the_interlock_still_latches() -> None:
    """Open for a millisecond is open: the latch needs the reset."""
    contacts = closed(fresh())
    contacts.set_interlock(0.2, False)
    contacts.set_interlock(0.201, True)
    contacts.move(0.3)
    assert not contacts.power


def test_unlatched_wiring_closes_again() -> None:
    """A bench whose circuit does not latch gives the power back when the loop closes."""
    contacts = Wiring(ContactParams(interlock_latches=False), 1)
    closed(contacts)
    contacts.set_interlock(0.2, False)
    contacts.move(0.3)
    assert not contacts.power
    contacts.set_interlock(0.4, True)
    assert contacts.outside_reset()
    assert contacts.power


def test_emergency_contact_drops_the_power_and_has_its_own_input() -> None:
    """Operating it leaves the interlock's input alone."""
    contacts = closed(fresh())
    contacts.set_emergency(0.2, False)
    contacts.move(0.3)
    assert not contacts.bits & Inputs.EMERGENCY
    assert contacts.bits & Inputs.INTERLOCK
    assert not contacts.power


def test_press_bounces_only_at_its_edges() -> None:
    """A press of 0.5 s is steady between the bounce of its edges."""
    contacts = fresh()
    contacts.press(1.0, 0.5)
    assert levels(contacts, Inputs.ARM_INPUT, [0.99, 1.0031, 1.2, 1.499, 1.5031, 2.0]) == [
        False, True, True, True, False, False]


def test_press_without_an_arm_input_is_not_seen() -> None:
    """A bench without the input reads nothing there."""
    contacts = Wiring(ContactParams(arm_input=False), 1)
    contacts.press(1.0, 0.5)
    assert levels(contacts, Inputs.ARM_INPUT, [1.2]) == [False]


def test_grounding_device_shows_its_position() -> None:
    """On the output its contact is not in the open position."""
    contacts = fresh()
    contacts.set_ground(True)
    assert contacts.shorted
    assert not contacts.bits & Inputs.GROUND_OPEN


@pytest.mark.parametrize(("fault", "power_after_cut"), [("relay-welded", True), ("clear-dead", False)])
def test_welded_relay_keeps_the_power(fault: str, power_after_cut: bool) -> None:
    """Once closed a welded relay stays closed, its read-back and the danger signal say so."""
    contacts = closed(fresh())
    contacts.settle({fault: 1.0})
    contacts.drive(0.2, True, True, False, 2e-4)
    contacts.move(0.3)
    assert contacts.power is power_after_cut
    assert bool(contacts.bits & Inputs.RELAY_BACK) is power_after_cut


def test_weld_that_lets_go_opens() -> None:
    """When the fault goes the relay follows its coil."""
    contacts = closed(fresh())
    contacts.settle({"relay-welded": 1.0})
    contacts.drive(0.2, True, True, False, 2e-4)
    contacts.move(0.3)
    contacts.settle({})
    assert not contacts.power


def test_welded_contactor_keeps_the_power_with_the_loop_open() -> None:
    """The interlock's input shows open, the danger signal still burns."""
    contacts = closed(fresh(contactor_welded=1.0))
    contacts.set_interlock(0.2, False)
    contacts.move(0.3)
    assert contacts.bits & Inputs.DANGER
    assert not contacts.bits & Inputs.INTERLOCK


@pytest.mark.parametrize(("fault", "bit", "level"), [
    ("danger-dark", Inputs.DANGER, False), ("relay-back-stuck", Inputs.RELAY_BACK, False),
    ("inhibit-dead", Inputs.INHIBIT_BACK, False), ("inhibit-lies", Inputs.INHIBIT_BACK, True),
    ("arm-stuck", Inputs.ARM_INPUT, True), ("polarity-wrong", Inputs.POLARITY, False),
    ("auxiliary-low", Inputs.AUXILIARY, False), ("ground-on", Inputs.GROUND_OPEN, False),
    ("ground-contact", Inputs.GROUND_OPEN, False), ("ground-lies", Inputs.GROUND_OPEN, True),
    ("interlock-open", Inputs.INTERLOCK, False), ("mains-lost", Inputs.DANGER, False)])
def test_fault_shows_in_its_input(fault: str, bit: Inputs, level: bool) -> None:
    """With the relay closed and the inhibit asserted, each fault of a contact reads as documented."""
    assert bool(closed(fresh(**{fault: 0.0 if fault == "relay-back-stuck" else 1.0})).bits & bit) is level


def test_danger_lit_without_power() -> None:
    """A signal that burns by itself is seen at rest."""
    contacts = fresh(danger_lit=1.0)
    assert contacts.bits & Inputs.DANGER
    assert not contacts.power


def test_bounce_fault_is_longer() -> None:
    """With `arm-bounce` the edges are ragged for as long as it says."""
    contacts = fresh(arm_bounce=0.08)
    contacts.press(0.0, 0.5)
    seen = levels(contacts, Inputs.ARM_INPUT, [k * 1e-3 for k in range(100)])
    assert sum(a != b for a, b in pairwise(seen)) >= 2
    assert all(seen[81:])
