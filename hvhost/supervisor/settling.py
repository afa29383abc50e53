"""Runs the second table to a fixed point: what must hold however the core arrived where it is."""

from dataclasses import replace
from typing import TYPE_CHECKING

from hvhost.supervisor import moving, stopping
from hvhost.supervisor.runs import Outcome
from hvhost.supervisor.states import SEAT_EMPTY_MAX_S, Consequence, Facts, Permission, Voltage, owed
from hvhost.wire.vocabulary import HostRule

if TYPE_CHECKING:
    from hvhost.supervisor.core import Core


def settle(core: "Core", now_s: float) -> None:
    """Ask every row of the table, obey, and ask again until none asks for anything; bounded by their number."""
    if _looked_at(core, now_s) == core.settled:
        return  # it held then, and holds now
    for _ in range(len(Consequence)):
        asked = owed(core.state, facts_of(core, now_s))
        if not asked:
            core.settled = _looked_at(core, now_s)
            return
        for consequence in asked:
            _obey(core, consequence, now_s)


def facts_of(core: "Core", now_s: float) -> Facts:
    """What the table looks at besides the state."""
    run = core.run
    return Facts(
        run_open=run is not None and run.open, direct=run is not None and run.spec.kind == "direct",
        seat_empty_s=core.seat.empty_s(now_s), recorder_ready=core.recorder_ready,
        block_age_s=now_s - max(core.block_s, core.awake_s), lease_s=core.bench.lease_s, stopping=core.link_stopping)


def _looked_at(core: "Core", now_s: float) -> tuple[object, ...]:
    """All that the rows of the table look at, each number as what its row compares it with."""
    run, empty_s = core.run, core.seat.empty_since_s
    return (core.state, run is not None and run.open, run is not None and run.spec.kind == "direct",
            empty_s is not None and now_s - empty_s >= SEAT_EMPTY_MAX_S, core.recorder_ready,
            now_s - max(core.block_s, core.awake_s) > core.bench.lease_s, core.link_stopping)


def _obey(core: "Core", consequence: Consequence, now_s: float) -> None:
    match consequence:
        case Consequence.CUT_DISAGREEMENT:
            stopping.cut_for(core, HostRule.DISAGREEMENT, now_s)
        case Consequence.CUT_STALE:
            stopping.cut_for(core, HostRule.STALE, now_s)
        case Consequence.LOWER_RECORDER:
            stopping.lower_for(core, Outcome.RECORD_FAILED, "the recorder failed: the run is lowered", now_s)
        case Consequence.LOWER_SEAT:
            stopping.lower_for(core, Outcome.LOWERED, "nobody has had control for 10 s", now_s)
        case Consequence.END_INTERRUPTED:
            if core.run is not None:
                core.run.end(Outcome.INTERRUPTED, core.link_text)
        case Consequence.PERMISSION_IDLE:
            moving.permit(core, Permission.IDLE, now_s)
        case Consequence.VOLTAGE_UNKNOWN:
            core.discharge.unknown("no readback")
            core.state = replace(core.state, voltage=Voltage.UNKNOWN)
