"""Rules about the stream and the contacts."""

import pytest

from hvhost.guard.guard import Guard
from hvhost.guard.verdicts import Severity
from hvhost.samples.blocks import Flags
from hvhost.wire.vocabulary import HostRule, Inputs, McuState
from tests.guard.build import CLOSED, block, limits

ZEROS = [0] * 8


@pytest.mark.parametrize(("pairs", "state", "severity"), [
    (1, McuState.ENERGISED, Severity.EVENT), (99, McuState.ENERGISED, Severity.EVENT),
    (100, McuState.ENERGISED, Severity.TRIP), (100, McuState.LOWERING, Severity.TRIP),
    (5000, McuState.OFF, Severity.EVENT)])
def test_a_gap_is_an_event_and_a_long_one_with_power_on_a_trip(pairs: int, state: McuState,
                                                               severity: Severity) -> None:
    """A lost block is told; as many missing pairs as the limit says, with power on, trip."""
    (found,) = Guard(limits()).judge(block(9000, ZEROS, ZEROS, gap=pairs, state=state))
    assert (found.rule, found.severity, found.measured) == (HostRule.GAP, severity, pairs)


@pytest.mark.parametrize(("opened", "rule"), [
    (Inputs.INTERLOCK, HostRule.INTERLOCK), (Inputs.EMERGENCY, HostRule.INTERLOCK),
    (Inputs.GROUND_OPEN, HostRule.GROUNDING), (Inputs.AUXILIARY, HostRule.AUXILIARY)])
def test_an_open_contact_trips_once_wherever_power_may_come(opened: Inputs, rule: HostRule) -> None:
    """From proving to the cut an open contact trips; with the output off it is only a status."""
    for state in McuState:
        guard = Guard(limits())
        blocks = [block(8 * k, ZEROS, ZEROS, inputs=CLOSED & ~opened, state=state) for k in range(3)]
        found = [x for each in blocks for x in guard.judge(each)]
        expected = [] if state in {McuState.OFF, McuState.REQUESTED} else [(rule, Severity.TRIP)]
        assert [(x.rule, x.severity) for x in found] == expected


def test_a_contact_that_does_not_exist_is_not_missed() -> None:
    """Only contacts that the bench has must be closed."""
    loop = int(Inputs.INTERLOCK)
    assert Guard(limits(contacts=loop)).judge(block(0, ZEROS, ZEROS, inputs=loop)) == ()


def test_a_late_block_is_told_once_a_backlog() -> None:
    """Stale blocks are an event at their first, and again only after a fresh one."""
    guard = Guard(limits())
    flags = [Flags.STALE, Flags.STALE, Flags(0), Flags.STALE]
    found = [[x.rule for x in guard.judge(block(8 * k, ZEROS, ZEROS, flags=flag))] for k, flag in enumerate(flags)]
    assert found == [[HostRule.STALE], [], [], [HostRule.STALE]]


def test_silence_trips_with_power_on_and_is_told_once() -> None:
    """No block for the stated time is a stale stream: a trip where power is on, an event where it is off."""
    for state, severity in ((McuState.ENERGISED, Severity.TRIP), (McuState.OFF, Severity.EVENT)):
        guard = Guard(limits())
        assert guard.check_time(1e9) == ()
        guard.judge(block(0, ZEROS, ZEROS, state=state, arrival_s=10.0))
        assert guard.stale_at() == 10.5
        assert guard.check_time(10.499) == ()
        (found,) = guard.check_time(10.6)
        assert (found.rule, found.severity, found.limit, found.measured, found.index, found.tick) == (
            HostRule.STALE, severity, 500, 600, 7, 70)
        assert guard.check_time(11.0) == ()
        guard.judge(block(8, ZEROS, ZEROS, state=state, arrival_s=12.0))
        assert guard.check_time(12.5)
