"""The first table at work: what the MCU reports moves the permission, or is cut."""

from hvhost.supervisor import moving
from hvhost.supervisor.states import Move, Permission
from hvhost.wire.vocabulary import McuState
from tests.supervisor.lab import Lab


def test_a_report_that_nobody_permitted_is_answered_by_a_cut(lab: Lab) -> None:
    """Energised while idle: the cut is decided at once, and nothing is taken for permitted."""
    core = lab.ready().core
    moving.mcu_in(core, McuState.ENERGISED, 0, lab.now_s)
    assert core.state.permission is Permission.IDLE
    assert core.link_stopping
    assert any("while idle is permitted: cut" in line.text for line in core.log)


def test_a_move_of_ours_that_the_table_does_not_hold_changes_nothing(lab: Lab) -> None:
    """A hold cannot begin where nothing is energised."""
    moving.move(lab.core, Move.HOLD_BEGUN, lab.now_s)
    assert lab.core.state.permission is Permission.IDLE
    assert not lab.core.link_stopping


def test_each_entry_into_a_permission_is_written_down(lab: Lab) -> None:
    """From the press to the hold, every state stands in the journal once, in order."""
    lab.energise().held()
    assert lab.core.state.permission is Permission.HOLD
    moving.permit(lab.core, Permission.HOLD, lab.now_s)
    assert lab.core.state.permission is Permission.HOLD
