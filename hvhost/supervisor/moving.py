"""Moves the permission by the first table: on what the MCU reports, and on our own accepted acts."""

from dataclasses import replace
from typing import TYPE_CHECKING

from hvhost.supervisor import arming, stopping
from hvhost.supervisor.runs import Stage
from hvhost.supervisor.states import MOVE_OF, Move, Permission, moved
from hvhost.wire.vocabulary import HostRule, McuState

if TYPE_CHECKING:
    from hvhost.supervisor.core import Core


def mcu_in(core: "Core", mcu: McuState, tick: int, now_s: float) -> None:
    """The MCU reports this state; one that no entry of the table allows is answered by a cut."""
    if core.late:
        return
    run = core.run
    if (mcu in (McuState.REQUESTED, McuState.PROVING) and core.state.permission is Permission.IDLE
            and run is not None and run.stage is Stage.ARMED and run.requested_s is None and not run.ended):
        arming.accepted(core, run, now_s)  # its event and its answer were lost
    before = core.state.permission
    after = moved(before, MOVE_OF[mcu])
    if after is None:
        if core.link is not None and not core.link_stopping:
            core.say(now_s, "trip", f"the MCU reports {mcu.name.lower()} while {before} is permitted: cut")
            stopping.cut_for(core, HostRule.DISAGREEMENT, now_s)
        after = Permission.IDLE if mcu is McuState.OFF else before
    if after is not before:
        permit(core, after, now_s)
        if after is Permission.IDLE:
            arming.off(core, tick, now_s)


def move(core: "Core", way: Move, now_s: float) -> None:
    """A move of our own (arm accepted, hold begun, ...)."""
    after = moved(core.state.permission, way)
    if after is not None and after is not core.state.permission:
        permit(core, after, now_s)


def permit(core: "Core", permission: Permission, now_s: float) -> None:
    """Enter a permission and write it down."""
    core.state = replace(core.state, permission=permission)
    core.note(now_s, "state", permission=str(permission), link=str(core.state.link), latched=core.state.latched)
