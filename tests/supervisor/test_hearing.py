"""Events, answers and notices: what each leads to, also late, twice, or not at all."""

from collections.abc import Callable

import pytest

from hvhost.supervisor import hearing
from hvhost.supervisor.states import Permission
from hvhost.wire.frames import McuEvent
from hvhost.wire.vocabulary import Cause, EventKind, Inputs
from tests.supervisor.lab import Lab, plan_of

Labs = Callable[..., Lab]
QUIET = {EventKind.BOOT, EventKind.SESSION, EventKind.CAUSE}  # the greeting tells, or it is acted on before the table


def event(lab: Lab, kind: str, a: int = 0, b: int = 0) -> None:
    """The next event of the MCU."""
    number = lab.core.last_event + 1
    tick = lab.core.sample.tick if lab.core.sample else 0
    hearing.mcu_event(lab.core, McuEvent(number=number, tick=tick, kind=kind, a=a, b=b), lab.now_s)


def test_every_kind_of_event_is_acted_on() -> None:
    """None is forgotten in the table."""
    assert set(EventKind) - QUIET == set(hearing._ACTS)


@pytest.mark.parametrize("kind", [k for k in EventKind if k not in QUIET])
@pytest.mark.parametrize(("a", "b"), [(0, 0), (-1, -1), (2**31 - 1, 2**31 - 1), (-2**31, 7)])
def test_no_event_of_a_confused_mcu_ends_the_core(lab: Lab, kind: str, a: int, b: int) -> None:
    """Any numbers, on an idle bench: acted on or not, and nothing is permitted by it (S11)."""
    lab.ready()
    event(lab, kind, a, b)
    assert lab.permission in (Permission.IDLE, Permission.LOWERING)


def test_a_cause_told_again_changes_nothing(lab: Lab) -> None:
    """Latched once, said once."""
    lab.ready()
    for _ in range(2):
        event(lab, EventKind.CAUSE, int(Cause.OVERVOLTAGE))
    assert lab.core.state.latched == Cause.OVERVOLTAGE
    assert sum("overvoltage" in line for line in lab.lines()) == 1


def test_an_unknown_cause_is_told_by_its_bit(lab: Lab) -> None:
    """A newer MCU may know more."""
    lab.ready()
    event(lab, EventKind.CAUSE, 1 << 29)
    assert lab.said("cause 20000000")


def test_contacts_follow_events_between_blocks_and_old_blocks_do_not_undo_them(lab: Lab) -> None:
    """An interlock that was open for 15 ms is remembered as opened."""
    lab.ready()
    lab.core.interlock_opened = False
    lab.board.plant.interlock(False)
    lab.pass_s(0.015)
    lab.board.plant.interlock(True)
    lab.pass_s(0.1)
    assert lab.core.interlock_opened
    assert lab.core.inputs & Inputs.INTERLOCK
    at = lab.core.inputs_tick
    hearing.inputs_changed(lab.core, 0, at - 10, lab.now_s)
    assert lab.core.inputs & Inputs.INTERLOCK


def test_a_latch_without_a_known_cause_is_asked_for(lab: Lab) -> None:
    """The cause's event was lost, and its number was seen: the last events are told again."""
    lab.energise(plan_of()).held()
    lab.tap = lambda line: b"" if line.startswith(b"ev ") and b" cause " in line else line
    lab.fault("arc").until(lambda: lab.permission is Permission.IDLE, 1.0)
    lab.tap = lambda line: line
    lab.pass_s(0.2)
    assert lab.core.state.latched == Cause.BREAKDOWN


def test_a_press_of_wrong_length_is_told(lab: Lab) -> None:
    """More than three seconds is a stuck input: said, cut, nothing energised."""
    lab.ready().prepare()
    lab.arm()
    lab.board.plant.press(4.0)
    lab.pass_s(5.0)
    assert lab.said("arm input is stuck")
    assert not lab.released()


def test_a_cut_path_without_read_backs_is_told_as_not_proven(lab: Lab) -> None:
    """What the MCU could not prove is said."""
    lab.ready()
    event(lab, EventKind.PROVEN, 0, 7)
    assert lab.said("not proven")


def test_a_repeated_hold_event_ends_no_second_step(lab: Lab) -> None:
    """Told again while the next step runs."""
    lab.energise(plan_of()).held()
    at = lab.run.runner.at
    event(lab, EventKind.HOLD, lab.run.runner._accepted)
    event(lab, EventKind.HOLD, lab.run.runner._accepted - 1)
    assert lab.run.runner.at == at
