"""The two tables: complete, drawn whole, and never a way to energised but through an arm."""

from itertools import product

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.supervisor.states import (
    HOLDS,
    MOVE_OF,
    PERMISSION,
    RUNNING,
    SEAT_EMPTY_MAX_S,
    STANDING,
    Consequence,
    Facts,
    LinkState,
    Move,
    Permission,
    State,
    Voltage,
    diagram,
    moved,
    owed,
)
from hvhost.wire.vocabulary import McuState


def test_every_permission_has_a_row_and_every_mcu_state_a_move() -> None:
    """A missing row would be an accident; a missing entry is a cut."""
    assert set(PERMISSION) == set(Permission)
    assert set(MOVE_OF) == set(McuState)


def test_the_diagram_lists_every_entry_of_both_tables() -> None:
    """What the guide prints is the tables, whole."""
    text = diagram()
    for permission, moves in PERMISSION.items():
        rows = [line for line in text.splitlines() if line.startswith(f"  {permission.value:<10} --")]
        assert len(rows) == len(set(moves.values()))
        for move, target in moves.items():
            assert any(move.value in row and row.endswith(f"--> {target.value}") for row in rows)
    for name, _, consequences in HOLDS:
        assert f"  {name}: {'; '.join(c.value for c in consequences)}" in text


def test_every_consequence_is_asked_for_by_a_row() -> None:
    """No act without a condition."""
    assert {c for _, _, consequences in HOLDS for c in consequences} == set(Consequence)


@given(st.lists(st.sampled_from([move for move in Move if move is not Move.ARMED])))
def test_without_an_arm_no_sequence_of_reports_leads_to_running(moves: list[Move]) -> None:
    """Whatever an MCU reports and a runner notes: from idle only an accepted arm leads on."""
    permission = Permission.IDLE
    for move in moves:
        permission = moved(permission, move) or permission
        assert permission not in RUNNING | {Permission.PAUSING, Permission.WARNING, Permission.REQUESTED}


@given(st.lists(st.sampled_from(list(Move))))
def test_running_always_lies_behind_an_arm_that_is_newer_than_the_last_idle(moves: list[Move]) -> None:
    """After each return to idle it takes a fresh arm."""
    permission, armed = Permission.IDLE, False
    for move in moves:
        after = moved(permission, move)
        if after is None:
            continue
        armed = (armed or (permission is Permission.IDLE and move is Move.ARMED)) and after is not Permission.IDLE
        permission = after
        assert permission not in RUNNING or armed


def test_nothing_leads_out_of_lowering_but_off() -> None:
    """Nothing stops a lower but a cut."""
    assert set(PERMISSION[Permission.LOWERING].values()) == {Permission.LOWERING, Permission.IDLE}


def test_standing_is_what_moves_nothing() -> None:
    """The set of reports that change no permission agrees with the table."""
    for state, permission in product(McuState, Permission):
        assert ((int(state), permission) in STANDING) == (moved(permission, MOVE_OF[state]) is permission)


@pytest.mark.parametrize("permission", [p for p in Permission if p is not Permission.IDLE])
def test_a_lost_link_ends_whatever_is_permitted(permission: Permission) -> None:
    """Interrupted, idle, voltage unknown."""
    state = State(link=LinkState.LOST, permission=permission, voltage=Voltage.PRESENT)
    asked = owed(state, Facts(run_open=True))
    assert {Consequence.END_INTERRUPTED, Consequence.PERMISSION_IDLE, Consequence.VOLTAGE_UNKNOWN} <= set(asked)


@pytest.mark.parametrize(("facts", "permission", "asked"), [
    (Facts(run_open=True, block_age_s=0.6), Permission.HOLD, Consequence.CUT_STALE),
    (Facts(run_open=True, block_age_s=0.6), Permission.REQUESTED, Consequence.CUT_STALE),
    (Facts(run_open=False), Permission.RAMP, Consequence.CUT_DISAGREEMENT),
    (Facts(run_open=False), Permission.WARNING, Consequence.CUT_DISAGREEMENT),
    (Facts(run_open=True, recorder_ready=False), Permission.WARNING, Consequence.LOWER_RECORDER),
    (Facts(run_open=True, recorder_ready=False), Permission.PAUSING, Consequence.LOWER_RECORDER),
    (Facts(run_open=True, direct=True, seat_empty_s=SEAT_EMPTY_MAX_S), Permission.RAMP, Consequence.LOWER_SEAT)])
def test_the_second_table_asks_for_a_stop_once(facts: Facts, permission: Permission, asked: Consequence) -> None:
    """Each condition asks for its stop, and no longer once a stop is under way."""
    from dataclasses import replace

    state = State(link=LinkState.GREETED, permission=permission, voltage=Voltage.UNKNOWN)
    assert owed(state, facts) == (asked,)
    assert owed(state, replace(facts, stopping=True)) == ()


def test_a_plan_run_needs_no_holder_and_a_lower_no_recorder() -> None:
    """What may go on goes on."""
    greeted = State(link=LinkState.GREETED, permission=Permission.HOLD)
    assert owed(greeted, Facts(run_open=True, seat_empty_s=100.0)) == ()
    lowering = State(link=LinkState.GREETED, permission=Permission.LOWERING)
    assert owed(lowering, Facts(run_open=True, recorder_ready=False)) == ()


def test_a_voltage_is_claimed_by_no_old_block() -> None:
    """A reading older than the lease says nothing (S13)."""
    state = State(link=LinkState.GREETED, voltage=Voltage.BELOW)
    assert owed(state, Facts(block_age_s=0.51)) == (Consequence.VOLTAGE_UNKNOWN,)
    assert owed(state, Facts(block_age_s=0.49)) == ()
