"""Scenarios on a whole bench in memory, judged by the plant's truth where that can tell."""

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest

from hvhost.guard.guard import Guard
from hvhost.record.blockfile import read_blocks
from hvhost.record.entries import Entry, NoteEntry
from hvhost.record.folder import RunFolder
from hvhost.supervisor.runs import Outcome, Stage
from hvhost.supervisor.states import LIVE, LinkState, Permission, Voltage
from hvhost.wire.vocabulary import Cause, HostRule, McuState
from hvhost.words.errors import CommandRefused
from tests.supervisor.lab import DEMO, ME, OTHER, PAUSE, SMALL, Lab, fallen, plan_of, shown

Labs = Callable[..., Lab]
LONG_HOLD = """\
  - ramp: {to: 4 kV, rate: 4 kV/s}
  - hold: {name: level, for: 60 s, at_most: 90 s, window: 200 ms}
"""
TO_BREAKDOWN = """\
  - ramp: {to: 2 kV, rate: 4 kV/s}
  - ramp: {name: rise, to: 12 kV, rate: 4 kV/s, until: breakdown}
"""
SERIES = plan_of(TO_BREAKDOWN, PAUSE, "criterion: breakdown above, limit: 1 kV")


def arcs(lab: Lab) -> int:
    """Arcs by the plant's truth."""
    return len(lab.happened("arc"))


# ---------------------------------------------------------------- arming (S1)


def test_without_a_press_nothing_is_energised(lab: Lab) -> None:
    """The command alone releases nothing, and the request expires by itself."""
    lab.ready().prepare()
    lab.arm().pass_s(31.0)
    assert lab.run.outcome is Outcome.CANCELLED
    assert not lab.released()
    assert lab.idle()


def test_a_press_without_the_command_does_nothing(lab: Lab) -> None:
    """The press alone arms nothing."""
    lab.ready().prepare()
    lab.press().pass_s(5.0)
    assert lab.run.stage is Stage.PREPARED
    assert not lab.released()


def test_a_changed_run_sheet_voids_the_arm(lab: Lab) -> None:
    """Another sheet while one is armed cuts; the old arm leads nowhere, whoever presses."""
    lab.ready().prepare()
    lab.arm()
    with pytest.raises(CommandRefused, match="others: the arm is void"):
        lab.prepare(specimen="B-2")
    lab.press().pass_s(6.0)
    assert lab.run.outcome is Outcome.CANCELLED
    assert "changed" in lab.run.why
    assert not lab.released()


def test_a_changed_run_sheet_replaces_a_prepared_run(lab: Lab) -> None:
    """What was not armed yet is closed as cancelled and the changed one is opened."""
    lab.ready().prepare()
    first = lab.run
    lab.prepare(specimen="B-2")
    assert first.outcome is Outcome.CANCELLED
    assert lab.run.spec.specimen == "B-2"
    assert lab.run.stage is Stage.PREPARED


def test_the_same_run_sheet_again_voids_nothing(lab: Lab) -> None:
    """Asking twice for the same run is refused and leaves the arm alone."""
    lab.ready().prepare()
    lab.arm()
    with pytest.raises(CommandRefused):
        lab.prepare()
    assert lab.permission is Permission.REQUESTED


def test_cancel_voids_the_arm_by_a_cut(lab: Lab) -> None:
    """After a cancel a press leads nowhere."""
    lab.ready().prepare()
    lab.arm().ask("cancel", ticket=OTHER)
    lab.pass_s(0.1).press().pass_s(5.0)
    assert lab.closed().outcome is Outcome.CANCELLED
    assert not lab.released()


@pytest.mark.parametrize(("fault", "told"), [
    ("interlock-open", "interlock open"), ("ground-contact", "grounding device"),
    ("auxiliary-low", "auxiliary supplies low"), ("polarity-wrong", "polarity"), ("danger-lit", "danger signal lit"),
    ("arm-stuck", "arm input")])
def test_every_contact_out_of_place_forbids_to_arm(lab: Lab, fault: str, told: str) -> None:
    """Each obstacle is named, and nothing is asked of the MCU."""
    lab.ready().prepare()
    lab.fault(fault).pass_s(0.2)
    with pytest.raises(CommandRefused, match=told):
        lab.ask("arm")
    assert lab.run.stage is Stage.PREPARED


def test_a_bench_without_an_arm_input_asks_for_the_runs_name(lab_of: Labs) -> None:
    """The second act is then the run's name, typed; without it nothing is armed."""
    lab = lab_of(bench=SMALL, profile="small").ready()
    plan = plan_of("  - ramp: {to: 1 kV, rate: 1 kV/s}\n  - hold: {for: 1 s, at_most: 8 s, window: 200 ms}\n")
    opened = lab.prepare(plan)
    with pytest.raises(CommandRefused, match="name typed"):
        lab.ask("arm")
    lab.ask("arm", typed=opened["run"])
    lab.until(lambda: lab.run.stage is Stage.LIVE, 8.0)
    assert lab.said("no arm input on this bench")


def test_an_interlock_opened_while_requested_voids_the_arm(lab: Lab) -> None:
    """The request ends without a latch, and closing the loop restores nothing."""
    lab.ready().prepare()
    lab.arm()
    lab.board.plant.interlock(False)
    lab.pass_s(0.2)
    lab.board.plant.interlock(True)
    lab.board.plant.outside_reset()
    lab.press().pass_s(5.0)
    assert lab.run.outcome is Outcome.CANCELLED
    assert not lab.released()


def test_a_cut_path_that_does_not_follow_latches_before_anything_is_out(lab: Lab) -> None:
    """A relay that is dead is found in proving: cut path, and the inhibit is not released onto the output."""
    lab.ready().prepare()
    lab.fault("relay-dead").arm().press().until(lambda: lab.core.state.latched & Cause.CUT_PATH, 5.0)
    assert not lab.released()
    assert lab.closed().outcome is Outcome.TRIPPED


def test_a_stale_arm_is_asked_again_with_the_last_event(lab: Lab) -> None:
    """An event between our look and the MCU's makes an arm stale; it is asked once more and then taken."""
    lab.ready().prepare()
    lab.pass_s(0.1)
    lab.core.events.last -= 1  # one that the host has not seen
    lab.arm()
    assert lab.run.arm_tries == 2
    assert lab.permission is Permission.REQUESTED


# ---------------------------------------------------------------- trips


def test_an_arc_in_the_hold_cuts_and_latches(lab: Lab) -> None:
    """The specimen arcs: cut within milliseconds by the plant's own clock, cause and host's verdict on the record."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.fault("arc").until(lambda: lab.idle(), 1.0).pass_s(0.05)
    arc = lab.happened("arc")[0]
    cut = next(line for line in lab.happened("cut") if line["t_s"] >= arc["t_s"])
    assert cut["t_s"] - arc["t_s"] < 0.01
    assert lab.cut()
    assert lab.core.state.latched == Cause.BREAKDOWN
    assert lab.closed().outcome is Outcome.TRIPPED
    assert lab.run.arc_tick is not None


def test_an_interlock_opened_in_the_ramp_cuts_and_stays_cut(lab: Lab) -> None:
    """Closing the loop again restores nothing, and the latch forbids the next arm."""
    lab.energise(plan_of(LONG_HOLD)).until(lambda: lab.v_true() > 1500.0)
    lab.board.plant.interlock(False)
    lab.pass_s(0.05)
    assert lab.cut()
    lab.board.plant.interlock(True)
    lab.board.plant.outside_reset()
    lab.pass_s(1.0)
    assert lab.cut()
    assert lab.core.state.latched & Cause.INTERLOCK
    assert lab.closed().outcome is Outcome.TRIPPED
    lab.prepare()
    with pytest.raises(CommandRefused, match="latched"):
        lab.ask("arm")


def test_an_arc_while_lowering_trips_the_run(lab: Lab) -> None:
    """What happens on the way down belongs to the run: lowered becomes tripped."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.ask("lower")
    lab.until(lambda: lab.permission is Permission.LOWERING, 1.0).pass_s(0.05)
    lab.fault("arc").until(lambda: lab.idle(), 1.0)
    assert lab.cut()
    assert lab.closed().outcome is Outcome.TRIPPED
    assert lab.run.why == "breakdown"


def test_only_a_reset_that_names_its_causes_clears_a_trip(lab: Lab) -> None:
    """A reset with another set is refused by the MCU; the right one clears, and a fresh arm energises again."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.fault("arc").until(lambda: lab.idle(), 1.0)
    lab.closed()
    ticket = lab.ask("reset", causes=["overcurrent"])["ticket_number"]
    lab.until(lambda: ticket in lab.core.replies, 1.0)
    assert lab.core.replies[ticket] == "refused: causes"
    assert lab.core.state.latched
    lab.reset().prepare(specimen="A-2", reason="the specimen was changed by another person")
    lab.arm().press().until(lambda: lab.run.stage is Stage.LIVE, 6.0)


def test_a_breakdown_only_the_host_sees_is_told_to_the_mcu_and_cuts(lab: Lab) -> None:
    """The host's verdict alone stops the output; the latch says which rule of the host it was."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.tap = shown(fallen(0))
    lab.until(lambda: lab.idle(), 1.0)
    assert lab.cut()
    assert arcs(lab) == 0
    assert lab.core.state.latched == Cause.HOST_RULE
    assert lab.closed().outcome is Outcome.TRIPPED
    assert lab.run.cause_text() == "host: breakdown"


def test_a_guard_that_fails_cuts(lab: Lab, monkeypatch: pytest.MonkeyPatch) -> None:
    """An error inside the judgement is no leave to go on: cut, no renewal, told by name."""
    lab.energise(plan_of(LONG_HOLD)).held()

    def judge(self: Guard, block: object) -> tuple[()]:
        raise ArithmeticError("no more")

    monkeypatch.setattr(Guard, "judge", judge)
    lab.pass_s(0.1)
    assert lab.cut()
    assert lab.run.outcome is Outcome.TRIPPED
    assert "ArithmeticError" in lab.run.why


# ---------------------------------------------------------------- pauses


def test_an_arc_seen_by_both_counts_once_and_the_run_climbs_from_below_it(lab: Lab) -> None:
    """The relay stays closed through the pause, and the climb after it ends at half of what broke down."""
    lab.energise(SERIES).until(lambda: lab.v_true() > 6000.0)
    lab.fault("arc").until(lambda: lab.permission is Permission.PAUSING, 1.0)
    volts = lab.run.runner.v_breakdown
    assert volts == pytest.approx(6000.0, rel=0.05)
    assert lab.board.mcu.core.relay
    assert lab.board.mcu.core.inhibit
    lab.until(lambda: lab.permission is Permission.RETREAT, 3.0).pass_s(0.05)
    assert lab.run.runner.words[0] == lab.bench.voltage.program.code(0.5 * volts)
    lab.until(lambda: lab.permission is Permission.RAMP, 3.0)
    assert lab.run.arcs == 1


def test_an_arc_that_only_the_host_sees_pauses_and_counts_once(lab: Lab) -> None:
    """The host's arc is an arc of its own; the record says who saw it."""
    notes: list[dict[str, object]] = []
    lab.energise(SERIES).until(lambda: lab.v_true() > 5000.0)
    note = lab.core.note
    lab.core.note = lambda now_s, what, **data: (  # type: ignore[method-assign]
        notes.append({"what": what, **data}), note(now_s, what, **data))[1]
    lab.tap = shown(fallen(0))
    lab.until(lambda: lab.permission is Permission.PAUSING, 1.0).pass_s(0.3)
    assert lab.run.arcs == 1
    assert [n["seen_by"] for n in notes if n["what"] == "arc"] == ["host"]


def test_a_series_ends_its_ramp_and_the_plan_finishes(lab: Lab) -> None:
    """Three breakdowns complete the ramp; the lower at the end of the plan cuts out of the pause."""
    lab.energise(SERIES)
    for number in range(1, 4):
        lab.until(lambda: lab.v_true() > 3000.0 and lab.permission is Permission.RAMP, 10.0).fault("arc")
        lab.until(lambda n=number: lab.run.arcs == n, 1.0)  # type: ignore[misc]
    run = lab.closed()
    assert run.outcome is Outcome.FINISHED
    assert run.arcs == 3
    assert lab.cut()


def test_a_lower_in_the_pause_is_a_cut(lab: Lab) -> None:
    """Nothing re-energises after a stop in the pause."""
    lab.energise(SERIES).until(lambda: lab.v_true() > 5000.0)
    lab.fault("arc").until(lambda: lab.permission is Permission.PAUSING, 1.0)
    lab.ask("lower", ticket=OTHER)
    lab.pass_s(0.1)
    assert lab.cut()
    at = lab.now_s
    lab.pass_s(3.0)
    assert not lab.released(at)
    assert lab.closed().outcome is Outcome.LOWERED


def test_overcurrent_without_collapse_latches_in_a_paused_plan(lab: Lab) -> None:
    """A raised current alone is no arc."""
    lab.energise(SERIES).until(lambda: lab.v_true() > 3000.0)
    lab.fault("i-offset", 20000).until(lambda: lab.idle(), 2.0)
    assert lab.cut()
    assert lab.closed().outcome is Outcome.TRIPPED


# ---------------------------------------------------------------- stops and the seat (S7)


def test_anyone_may_stop_and_the_holder_acknowledges(lab: Lab) -> None:
    """A stop needs no control; who had it cannot go on before having seen it."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.ask("cut", ticket=OTHER)
    lab.pass_s(0.05)
    assert lab.cut()
    assert lab.closed().outcome is Outcome.CUT
    with pytest.raises(CommandRefused, match="stopped by other"):
        lab.prepare(specimen="A-2", reason="second specimen")
    lab.ask("seat.acknowledge")
    assert lab.ask("seat.check") == {"holder": ME, "stopped_by": ""}


def test_a_cut_is_confirmed_by_answer_and_block(lab: Lab) -> None:
    """The screen says sent, then confirmed."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.ask("cut")
    assert lab.picture().stop == "cut sent"
    lab.pass_s(0.2)
    assert lab.picture().stop == "cut confirmed"


def test_a_cut_that_no_read_back_confirms_is_told_and_holds_no_record_open(lab: Lab) -> None:
    """A welded relay: 'use the emergency switching off', 'power still on' on the record, and the record is closed."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.fault("relay-welded").pass_s(0.05)
    lab.ask("cut")
    lab.pass_s(1.5)
    assert lab.picture().stop == "cut not confirmed: use the emergency switching off"
    run = lab.closed()
    assert run.causes & Cause.POWER_STILL_ON
    assert run.outcome is Outcome.CUT


def test_a_cut_in_the_way_down_names_who_cut(lab: Lab) -> None:
    """Lowered and then cut is a cut."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.ask("lower")
    lab.until(lambda: lab.permission is Permission.LOWERING, 1.0)
    lab.ask("cut")
    lab.pass_s(0.05)
    assert lab.cut()
    assert lab.closed().outcome is Outcome.CUT


def test_a_prepared_run_outlives_a_lower(lab: Lab) -> None:
    """Nothing is armed, so nothing ends."""
    lab.ready().prepare()
    lab.ask("lower")
    lab.pass_s(0.2)
    assert lab.run.stage is Stage.PREPARED
    assert not lab.run.ended


def test_a_plan_run_goes_on_without_a_holder(lab: Lab) -> None:
    """Control released: the plan runs on."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.ask("seat.release")
    lab.pass_s(12.0)
    assert lab.permission is Permission.HOLD


def test_a_direct_run_lowers_ten_seconds_after_its_holder_left(lab: Lab) -> None:
    """Nobody in control of a hand-set output: lower; taking control afterwards re-energises nothing."""
    lab.direct().ask("set", volts=2000.0, amps=0.001)
    lab.until(lambda: lab.v_true() > 1950.0, 5.0)
    lab.ask("seat.release")
    lab.pass_s(9.5)
    assert lab.permission in LIVE - {Permission.LOWERING}
    lab.until(lambda: lab.permission is Permission.LOWERING, 1.0)
    lab.ask("seat.take", ticket=OTHER)
    lab.until(lambda: lab.cut(), 5.0)
    at = lab.now_s
    lab.pass_s(2.0)
    assert not lab.released(at)
    assert lab.closed().outcome is Outcome.LOWERED


def test_a_direct_run_goes_on_when_someone_takes_control_in_time(lab: Lab) -> None:
    """The seat was empty for less than 10 s."""
    lab.direct().ask("set", volts=2000.0, amps=0.001)
    lab.pass_s(3.0).ask("seat.release")
    lab.pass_s(8.0).ask("seat.take", ticket=OTHER)
    lab.pass_s(5.0)
    assert lab.v_true() == pytest.approx(2000.0, rel=0.02)


def test_a_direct_run_reaches_slow_set_points_within_its_ceilings(lab: Lab) -> None:
    """Even a slew of a code in two pieces arrives; nothing above a ceiling is taken, nothing is clipped in silence."""
    lab.direct().ask("set", volts=300.0, amps=0.001)
    lab.pass_s(3.0).ask("set", volts=305.0, amps=0.001, slew=0.8)
    lab.pass_s(8.0)
    assert lab.picture().set_volts == pytest.approx(305.0, abs=0.5)
    for wrong in ({"volts": 24.5e3, "amps": 0.001}, {"volts": 1e3, "amps": 0.005}, {"volts": -1.0, "amps": 0.001},
                  {"volts": 1e3, "amps": 0.001, "slew": 6e3}, {"volts": 1e3, "amps": 0.001, "slew": 0.0},
                  {"volts": float("nan"), "amps": 0.001}, {"volts": "1 kV", "amps": 0.001}, {"amps": 0.001}):
        with pytest.raises(CommandRefused):
            lab.ask("set", **wrong)
    lab.ask("lower")
    with pytest.raises(CommandRefused, match="not being stopped"):
        lab.ask("set", volts=100.0, amps=0.001)


# ---------------------------------------------------------------- link, stalls, boots (S4, S8, S10)


@pytest.mark.parametrize("permission", [
    Permission.REQUESTED, Permission.WARNING, Permission.RAMP, Permission.HOLD, Permission.LOWERING])
def test_a_port_lost_in_any_permission_ends_the_run_and_resumes_nothing(lab: Lab, permission: Permission) -> None:
    """Interrupted and closed at once; the MCU comes down by itself, and the new session energises nothing."""
    lab.ready().prepare(plan_of(LONG_HOLD))
    lab.arm()
    if permission is not Permission.REQUESTED:
        lab.press()
    if permission is Permission.LOWERING:
        lab.held().ask("lower")
    lab.until(lambda: lab.permission is permission, 10.0)
    lab.unplug()
    assert lab.run.stage is Stage.CLOSED
    assert lab.run.outcome is Outcome.INTERRUPTED
    assert lab.core.state.link is LinkState.LOST
    assert lab.core.state.voltage is Voltage.UNKNOWN
    lab.pass_s(0.6 + 4.0 / 5.0 + 0.2)  # lease, and 4 kV at the down-slew of 5 kV/s
    assert lab.cut()
    lab.plug().until(lambda: lab.core.state.link is LinkState.GREETED, 5.0).pass_s(2.0)
    assert lab.cut()
    assert lab.permission is Permission.IDLE
    assert not lab.released(lab.now_s - 2.0)


def test_a_port_lost_in_the_pause_re_energises_nothing(lab: Lab) -> None:
    """The lease lapses and the pause ends in a cut."""
    lab.energise(SERIES).until(lambda: lab.v_true() > 5000.0)
    lab.fault("arc").until(lambda: lab.permission is Permission.PAUSING, 1.0)
    lab.unplug()
    at = lab.now_s
    assert lab.run.outcome is Outcome.INTERRUPTED
    lab.pass_s(4.0)
    assert lab.cut()
    assert not lab.released(at)


def test_a_session_opened_in_the_middle_of_a_run_lowers(lab: Lab) -> None:
    """A daemon that comes back while the output is on is passive: lowering, observed, nothing resumed (S8)."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.unplug()
    lab.restart_host()
    lab.plug().until(lambda: lab.permission is Permission.LOWERING, 2.0)
    lab.until(lambda: lab.cut(), 3.0)
    lab.pass_s(1.0)
    assert lab.permission is Permission.IDLE
    assert lab.core.run is None
    assert lab.core.state.voltage is not Voltage.PRESENT


def test_a_silent_mcu_ends_the_run_as_interrupted_and_is_cut_when_it_is_back(lab: Lab) -> None:
    """No line for a lease: cut as long as anything may be on, closed as interrupted, voltage unknown."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.fault("mute").until(lambda: lab.core.state.link is LinkState.LOST, 1.0)
    assert lab.run.outcome is Outcome.INTERRUPTED
    assert lab.run.stage is Stage.CLOSED
    assert lab.core.state.voltage is Voltage.UNKNOWN
    assert lab.picture().reading is None
    lab.pass_s(0.1)
    assert lab.cut()
    lab.pass_s(1.5)
    assert lab.picture().stop == "cut not confirmed: use the emergency switching off"
    lab.mend("mute").until(lambda: lab.core.state.link is LinkState.GREETED, 8.0).pass_s(0.5)
    assert lab.picture().stop == "cut confirmed"
    assert lab.permission is Permission.IDLE


def test_a_host_that_cannot_be_heard_loses_the_lease(lab: Lab) -> None:
    """Renewals do not arrive: the MCU lowers by itself and latches; the run is interrupted with that cause."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.fault("deaf").until(lambda: lab.cut(), 3.0)
    run = lab.closed()
    assert run.outcome is Outcome.INTERRUPTED
    assert run.causes & Cause.HOST_SILENT


def test_a_host_that_judges_a_backlog_loses_the_lease(lab: Lab) -> None:
    """Blocks come 0.7 s late: what is judged is older than the lease, and no renewal keeps the output on (S4)."""
    lab.energise(plan_of(LONG_HOLD)).held()
    at = lab.now_s
    lab.fault("mcu-slow", 0.7).until(lambda: lab.cut(), 4.0)
    assert lab.now_s - at < 0.7 + 0.5 + 4.0 / 5.0 + 0.2
    assert lab.closed().outcome is not Outcome.FINISHED


def test_after_a_stall_longer_than_the_lease_no_set_point_leaves(lab: Lab) -> None:
    """SIGSTOP in the ramp: lowering begins within the lease, and on waking no arm and no segment is sent (S10)."""
    lab.energise(plan_of(LONG_HOLD)).until(lambda: lab.v_true() > 2000.0)
    at = lab.now_s
    lab.stall(3.0)
    words = [line["v_word"] for line in lab.states() if line["mcu"] == McuState.LOWERING]
    lowering = next(line for line in lab.states() if line["mcu"] == McuState.LOWERING)
    assert lowering["t_s"] - at < 0.55
    assert words == sorted(words, reverse=True)
    woken = [data for t_s, data in lab.sent if t_s >= lab.now_s - 0.0005]
    lab.pass_s(1.0)
    woken += [data for t_s, data in lab.sent if t_s >= lab.now_s - 1.0]
    assert not any(b"seg " in data or b"arm " in data for data in woken)
    assert lab.closed().outcome is Outcome.INTERRUPTED
    assert lab.cut()


def test_a_stall_that_a_timer_ends_is_not_taken_for_a_silent_mcu(lab: Lab) -> None:
    """Waking by a timer before the bytes that came meanwhile: the host looks at them before it says silent."""
    lab.ready()
    lab._awake = False
    lab.pass_s(1.0)
    lab._awake = True
    lab.station.tick()
    assert lab.core.state.link is LinkState.GREETED
    held, lab._held = bytes(lab._held), bytearray()
    lab.station.feed(held)
    lab.pass_s(0.5)
    assert lab.core.state.link is LinkState.GREETED


def test_a_reset_of_the_mcu_in_mid_run_is_interrupted_and_its_causes_go_to_that_run(lab: Lab) -> None:
    """The run closes as interrupted; after relinking causes and events are a revision of it; nothing resumes."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.fault("mcu-reset").until(lambda: lab.run.stage is Stage.CLOSED, 2.0)
    folder = lab.jobs[0].folder
    assert lab.run.outcome is Outcome.INTERRUPTED
    lab.until(lambda: lab.core.state.link is LinkState.GREETED, 5.0).pass_s(0.5)
    assert lab.cut()
    assert lab.core.state.latched & Cause.RESTARTED_ENERGISED
    from hvhost.record.manifest import revisions_of

    causes = [r for r in revisions_of(folder) if r["kind"] == "causes"]
    assert len(causes) == 1
    assert causes[0]["data"]["causes"] & Cause.RESTARTED_ENERGISED
    assert any(event[2] == "boot" for event in causes[0]["data"]["events"])


def test_a_snapshot_of_an_interrupted_run_is_stored_with_it_before_the_mcu_forgets(lab: Lab) -> None:
    """The arc's samples wait in the MCU through a lost link and become a revision; only then 'stored'."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.fault("arc").until(lambda: lab.idle(), 1.0)
    lab.unplug()
    folder = lab.jobs[0].folder
    lab.pass_s(1.0).plug()
    lab.until(lambda: lab.core.state.link is LinkState.GREETED, 5.0)
    assert any("earlier run" in text for text in lab.ask("status")["obstacles"])
    lab.pass_s(1.0)
    from hvhost.record.manifest import revisions_of

    kinds = {r["kind"] for r in revisions_of(folder)}
    assert kinds == {"causes", "evidence"}
    assert any(b"stored " in data for _, data in lab.sent)
    assert not any("earlier run" in text for text in lab.ask("status")["obstacles"])


def test_a_restarted_host_tells_the_same_causes_once(lab: Lab) -> None:
    """Each new session reads the causes; the run's folder gets them once."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.fault("arc").until(lambda: lab.idle(), 1.0)
    folder = lab.closed() and lab.jobs[0].folder
    from hvhost.record.manifest import revisions_of

    for _ in range(2):
        lab.unplug()
        lab.restart_host()
        lab.plug().until(lambda: lab.core.state.link is LinkState.GREETED, 5.0).pass_s(1.0)
    assert [r["kind"] for r in revisions_of(folder)].count("causes") == 1


def test_events_that_noise_swallowed_are_asked_for_again(lab: Lab) -> None:
    """Every event line of the ramp is lost on its way: the host asks again and the plan goes on to its end."""
    lab.ready().prepare()
    lab.arm().press()
    lost: list[bytes] = []

    def swallow(line: bytes) -> bytes:
        if line.startswith(b"ev ") and line not in lost and b" interfered " not in line:
            lost.append(line)
            return b""
        return line

    lab.tap = swallow
    run = lab.closed()
    assert len(lost) > 8
    assert run.outcome is Outcome.FINISHED
    assert not lab.said("are lost")


def test_events_that_are_gone_are_recorded_as_lost(lab: Lab) -> None:
    """What the MCU no longer keeps is named in the record (S5)."""
    lab.ready()
    lab.tap = lambda line: b"" if line.startswith(b"ev ") else line
    for _ in range(3):
        lab.fault("auxiliary-low").pass_s(0.1).mend("auxiliary-low").pass_s(0.1)
    lab.pass_s(2.0)
    assert lab.said("events of the MCU are lost")
    assert not lab.core.events.missing


def test_an_arm_that_is_never_answered_is_voided(lab: Lab) -> None:
    """The answer and every event are lost: given up, cut, and the run is closed as cancelled."""
    lab.ready().prepare()
    lab.tap = lambda line: line if line.startswith(b"b ") or b" cut" in line else b""
    lab.core.mcu_in = lambda *_: None  # type: ignore[method-assign]  # nor do blocks tell the state
    lab.ask("arm")
    lab.pass_s(1.5)
    assert any(data.startswith(b"\ncut ") for _, data in lab.sent)
    assert lab.closed().outcome is Outcome.CANCELLED


def test_an_arm_whose_answer_is_lost_is_known_from_the_blocks(lab: Lab) -> None:
    """The state in a block says that the arm was taken: no disagreement, no cut."""
    lab.ready().prepare()
    lab.tap = lambda line: line if line.startswith(b"b ") else b""
    lab.ask("arm")
    lab.until(lambda: lab.permission is Permission.REQUESTED, 0.5)
    assert not any(b"cut " in data for _, data in lab.sent)


# ---------------------------------------------------------------- record, settings, specimen


def test_a_recorder_that_fails_lowers_the_run(lab: Lab) -> None:
    """No record, no run: lowered, and the outcome says why."""
    lab.energise(plan_of(LONG_HOLD)).held()
    lab.station.record_failed("the disk is full")
    lab.until(lambda: lab.cut(), 3.0)
    assert any(line["mcu"] == McuState.LOWERING for line in lab.states())
    assert lab.run.outcome is Outcome.RECORD_FAILED
    assert lab.closed().why.startswith("the recorder failed")


def test_a_recorder_that_fails_while_requested_voids_the_arm(lab: Lab) -> None:
    """A press afterwards leads nowhere."""
    lab.ready().prepare()
    lab.arm()
    lab.station.record_failed("the disk is full")
    lab.pass_s(0.1).press().pass_s(5.0)
    assert not lab.released()


def test_blank_settings_refuse_to_arm_and_commissioning_mends(lab_of: Labs) -> None:
    """Linked to observe only; with the interlock open the settings are written, read back, and arming is allowed."""
    lab = lab_of(blank=True).greet()
    lab.ask("seat.take")
    assert lab.core.state.link is LinkState.OBSERVE
    with pytest.raises(CommandRefused, match="blank"):
        lab.prepare()
    with pytest.raises(CommandRefused, match="interlock open"):
        lab.ask("commission")
    lab.board.plant.interlock(False)
    lab.pass_s(0.1).ask("commission")
    lab.until(lambda: lab.core.state.link is LinkState.GREETED, 20.0)
    lab.board.plant.interlock(True)
    lab.board.plant.outside_reset()
    lab.pass_s(0.5).reset()
    lab.prepare()
    lab.arm().press().until(lambda: lab.run.stage is Stage.LIVE, 6.0)


def test_settings_that_differ_link_to_observe_only_and_both_values_are_named(lab_of: Labs) -> None:
    """The ceiling in the MCU is another than the bench file's: both are said, and nothing may be prepared."""
    settings = DEMO.settings()
    lab = lab_of(settings=settings.with_(vmax=settings["vmax"] // 2)).greet()
    lab.ask("seat.take")
    assert lab.core.state.link is LinkState.OBSERVE
    assert "24 kV" in lab.core.link_text
    assert "12 kV" in lab.core.link_text
    with pytest.raises(CommandRefused, match="observe only"):
        lab.prepare()
    lab.ask("cut")
    lab.pass_s(0.2)
    assert lab.picture().stop == "cut confirmed"


def test_a_specimen_lead_that_is_off_never_passes(lab: Lab) -> None:
    """The plan finishes; the verdict is not a pass (judged by the measures of the closed record)."""
    from hvhost.report.closing import close_run

    lab.fault("lead-off").energise()
    assert lab.closed().outcome is Outcome.FINISHED
    verdict = close_run(lab.jobs[0].folder).result.verdict.value
    assert verdict != "pass"


def test_a_replay_of_a_tripped_run_gives_the_same_verdicts(lab: Lab) -> None:
    """Everything that the core was given is in the record."""
    from hvhost.record.replay import replay

    lab.energise(plan_of(LONG_HOLD)).held()
    lab.fault("arc")
    lab.closed()
    found = replay(lab.jobs[0].folder)
    assert found.parted == ""
    assert found.verdicts >= 1


def test_a_replay_of_a_direct_run_that_lost_its_holder_gives_the_same_lines(lab: Lab) -> None:
    """Control that is taken, released and missed is an input as well."""
    from hvhost.record.replay import replay

    lab.direct().ask("set", volts=1000.0, amps=0.001)
    lab.pass_s(2.0)
    with pytest.raises(CommandRefused):
        lab.ask("set", ticket=OTHER, volts=2000.0, amps=0.001)
    lab.ask("seat.release")
    lab.pass_s(3.0).ask("seat.take", ticket=OTHER)
    lab.pass_s(1.0).ask("seat.release", ticket=OTHER)
    lab.closed(40.0)
    found = replay(lab.jobs[0].folder)
    assert found.parted == ""
    assert found.inputs > 100


def test_the_interlock_opened_since_the_last_energised_run_is_remembered(lab: Lab) -> None:
    """A cancelled run changes nothing; an energised one asks for an opening before the next specimen."""
    lab.ready().prepare()
    lab.ask("cancel")
    assert lab.core.interlock_opened
    lab.prepare()
    lab.arm().press().until(lambda: lab.run.stage is Stage.LIVE, 6.0)
    lab.ask("cut")
    lab.closed()
    assert not lab.core.interlock_opened
    lab.board.plant.interlock(False)
    lab.pass_s(0.1)
    assert lab.core.interlock_opened


def test_what_the_mcu_may_not_do_is_cut(lab: Lab) -> None:
    """An MCU that reports energised on an idle bench is cut for disagreement."""
    lab.ready()
    lab.tap = shown(lambda block: replace(block, state=int(McuState.ENERGISED)))
    lab.pass_s(0.1)
    assert lab.core.host_rule == HostRule.DISAGREEMENT
    assert any(data.startswith(b"\ncut ") for _, data in lab.sent)


def test_what_was_refused_stands_in_the_record_with_its_asker(lab: Lab) -> None:
    """Everything asked and what came of it: a set-point without control is on the record, refused."""
    lab.ready().prepare()
    with pytest.raises(CommandRefused):
        lab.ask("set", ticket="someone else", volts=1e3, amps=1e-3)
    lab.ask("cancel")
    lab.closed()
    folder = RunFolder.at(Path(lab.ask("status")["folder"]))
    notes = [entry.content.data for entry in read_blocks(folder.blocks)
             if isinstance(entry, Entry) and isinstance(entry.content, NoteEntry)
             and entry.content.data["what"] == "refused"]
    assert len(notes) == 1
    assert notes[0]["method"] == "set"
    assert "control" in notes[0]["text"]
