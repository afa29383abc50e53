"""What the condition registers show of a picture."""

from dataclasses import replace
from datetime import date

import pytest

from hvhost.publish.instrument.conditions import (
    CURRENT_TRIPS,
    VOLTAGE_TRIPS,
    Operation,
    Questionable,
    direct_run,
    operation_of,
    questionable_of,
)
from hvhost.publish.snapshot import LinkState, Permission, Phase, RecordView, Snapshot, VoltageState
from tests.publish.instrument.fakes import DIRECT, PLAN, FakeBench

VALID = date(2099, 12, 31)


def _shot() -> Snapshot:
    return FakeBench().picture()


def test_bits_are_the_standards_where_it_has_them() -> None:
    """SCPI-99 volume 1, 9.3 and 9.4 (as two independent libraries have them); ours lie in bits 8 to 12."""
    standard = {"SETTLING": 1, "SWEEPING": 3, "MEASURING": 4, "WAITING_FOR_ARM": 6}
    assert {bit.name: bit.bit_length() - 1 for bit in Operation if bit < 256} == standard
    standard = {"VOLTAGE": 0, "CURRENT": 1, "CALIBRATION": 8}
    assert {bit.name: bit.bit_length() - 1 for bit in Questionable if bit <= 256} == standard
    assert all(bit < 1 << 13 for bit in (*Operation, *Questionable))


@pytest.mark.parametrize(("permission", "phase", "bits"), [
    (Permission.IDLE, Phase.NONE, Operation(0)),
    (Permission.REQUESTED, Phase.NONE, Operation.WAITING_FOR_ARM),
    (Permission.PROVING, Phase.NONE, Operation.WARNING),
    (Permission.WARNING, Phase.NONE, Operation.WARNING),
    (Permission.RUNNING, Phase.RAMP, Operation.ENERGISED | Operation.SWEEPING),
    (Permission.RUNNING, Phase.RETREAT, Operation.ENERGISED | Operation.SWEEPING),
    (Permission.RUNNING, Phase.HOLD, Operation.ENERGISED | Operation.MEASURING),
    (Permission.RUNNING, Phase.REST, Operation.ENERGISED),
    (Permission.PAUSING, Phase.NONE, Operation.ENERGISED | Operation.PAUSING),
    (Permission.LOWERING, Phase.NONE, Operation.ENERGISED | Operation.LOWERING)])
def test_a_plan_run(permission: Permission, phase: Phase, bits: Operation) -> None:
    """Each state of a plan run has its bits; a pause counts as energised, since it will re-energise."""
    assert operation_of(replace(_shot(), permission=permission, phase=phase, run=PLAN)) == bits


@pytest.mark.parametrize(("phase", "bits"), [(Phase.RAMP, Operation.ENERGISED | Operation.SETTLING),
                                             (Phase.HOLD, Operation.ENERGISED)])
def test_a_direct_run_settles(phase: Phase, bits: Operation) -> None:
    """On its way to a set-point a direct run settles; there it neither sweeps nor measures."""
    assert operation_of(replace(_shot(), permission=Permission.RUNNING, phase=phase, run=DIRECT)) == bits


def test_a_run_that_has_ended_is_no_direct_run() -> None:
    """Nothing can be switched on in it any more."""
    assert direct_run(replace(_shot(), run=DIRECT))
    assert not direct_run(replace(_shot(), run=replace(DIRECT, ended=True)))
    assert not direct_run(_shot())
    assert not direct_run(replace(_shot(), run=PLAN))


def test_nothing_is_questionable_on_a_bench_in_order() -> None:
    """Greeted, fresh reading, valid calibration, no latch, recorder well."""
    assert questionable_of(_shot(), VALID) == 0


def test_each_doubt_has_its_bit() -> None:
    """Readings, calibration, latch, link, record and what is known of the voltage, one by one."""
    shot = _shot()
    assert shot.reading is not None
    both = Questionable.VOLTAGE | Questionable.CURRENT

    def flagged(*flags: str) -> Snapshot:
        assert shot.reading is not None
        return replace(shot, reading=replace(shot.reading, flags=flags))

    for doubted, bits in (
            (replace(shot, reading=None), both),
            (replace(shot, reading=replace(shot.reading, age_s=2.1 * shot.block_s)), both),
            (replace(shot, reading=replace(shot.reading, volts=None)), Questionable.VOLTAGE),
            (flagged("voltage at converter limit"), Questionable.VOLTAGE),
            (flagged("current reversed"), Questionable.CURRENT),
            (flagged("gap"), both), (flagged("missed conversions"), both),
            (replace(shot, latched=("interlock",)), Questionable.TRIPPED),
            (replace(shot, link=LinkState.OBSERVE), Questionable.LINK),
            (replace(shot, record=RecordView(ok=False, text="disk full")), Questionable.RECORD),
            (replace(shot, voltage=VoltageState.UNKNOWN), Questionable.VOLTAGE_STATE),
            (replace(shot, voltage=VoltageState.LOST), Questionable.VOLTAGE_STATE),
            (replace(shot, voltage=VoltageState.NOT_MEASURED), Questionable.VOLTAGE_STATE)):
        assert questionable_of(doubted, VALID) == bits


def test_calibration_counts_to_its_last_day() -> None:
    """The picture's own UTC day decides; no calibration at all is a doubt."""
    today = date(2025, 12, 1)  # of the fake's pictures
    assert questionable_of(_shot(), today) == 0
    assert questionable_of(_shot(), date(2025, 11, 30)) == Questionable.CALIBRATION
    assert questionable_of(_shot(), None) == Questionable.CALIBRATION


def test_protections_know_their_causes() -> None:
    """The MCU's rules and the host's, by the words on the screens; no cause is a protection of both."""
    assert {"overvoltage", "above envelope", "host: overvoltage"} == VOLTAGE_TRIPS
    assert {"overcurrent", "overcurrent level", "host: overcurrent", "host: overcurrent level"} == CURRENT_TRIPS
