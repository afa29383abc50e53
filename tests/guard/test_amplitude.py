"""Rules that compare a readback with one limit."""

from hvhost.guard.guard import Guard
from hvhost.guard.verdicts import Severity, Verdict
from hvhost.wire.vocabulary import HostRule, McuState
from tests.guard.build import block, limits

QUIET_V = [10000] * 32


def judged(guard: Guard, rule: HostRule, *blocks: tuple[list[int], list[int]], **fields: int) -> list[Verdict]:
    """The verdicts of one rule over consecutive blocks."""
    found = []
    index = 0
    for v, i in blocks:
        found += [x for x in guard.judge(block(index, v, i, v_word=10000, **fields)) if x.rule is rule]
        index += len(v)
    return found


def test_two_samples_above_the_limit_trip_at_the_second() -> None:
    """Overcurrent trips at the n-th consecutive sample and carries limit, value, index and tick."""
    i = [10] * 20 + [3001, 3005] + [10] * 10
    (found,) = judged(Guard(limits()), HostRule.OVERCURRENT, (QUIET_V, i))
    assert (found.severity, found.limit, found.measured, found.index, found.tick) == (
        Severity.TRIP, 3000, 3005, 21, 210)
    assert found.text == "current 3.005 mA above 3 mA"


def test_one_sample_is_interference_and_counted() -> None:
    """A single excursion never trips and is counted once it has ended."""
    guard = Guard(limits())
    assert not judged(guard, HostRule.OVERCURRENT, (QUIET_V, [10] * 5 + [32000] + [10] * 26))
    assert guard.interfering == {HostRule.OVERCURRENT: 1}


def test_an_excursion_goes_on_across_blocks_and_gaps() -> None:
    """The last sample of one block and the first of the next, a gap between, make two in a row."""
    guard = Guard(limits())
    guard.judge(block(0, [0] * 8, [10] * 7 + [4000]))
    found = guard.judge(block(40, [0] * 8, [4000] + [10] * 7, gap=32))
    assert HostRule.OVERCURRENT in {x.rule for x in found}


def test_an_excursion_leads_to_one_verdict_until_it_ends() -> None:
    """What stays above its limit is told once; after it fell below it is told again."""
    guard = Guard(limits())
    high, low = (QUIET_V, [4000] * 32), (QUIET_V, [10] * 32)
    assert len(judged(guard, HostRule.OVERCURRENT, high, high, high)) == 1
    assert len(judged(guard, HostRule.OVERCURRENT, low, high, high)) == 1


def test_level_needs_its_time_and_ignores_single_dips() -> None:
    """Overcurrent level trips after its time although single samples dip below, and not at one sample less."""
    guard = Guard(limits(level=2000, level_samples=40))
    wavy = [2001, 2001, 2001, 1900] * 16
    found = judged(guard, HostRule.OVERCURRENT_LEVEL, ([0] * 64, wavy))
    assert [x.index for x in found] == [40]
    short = [2001] * 39 + [10] * 25
    assert not judged(Guard(limits(level=2000, level_samples=40)), HostRule.OVERCURRENT_LEVEL, ([0] * 64, short))


def test_a_level_time_of_one_sample_still_needs_n() -> None:
    """However short the time, one sample of interference is not enough."""
    guard = Guard(limits(level=2000, level_samples=1))
    assert not judged(guard, HostRule.OVERCURRENT_LEVEL, (QUIET_V, [10] * 5 + [2500] + [10] * 26))
    assert len(judged(guard, HostRule.OVERCURRENT_LEVEL, (QUIET_V, [10] * 5 + [2500] * 2 + [10] * 25))) == 1


def test_overvoltage_trips_at_the_nth_sample() -> None:
    """Overvoltage with n = 3 trips at the third sample."""
    found = judged(Guard(limits(persist=3)), HostRule.OVERVOLTAGE, ([21001] * 8, [0] * 8))
    assert [(x.index, x.severity, x.text) for x in found] == [(2, Severity.TRIP, "voltage 21.001 kV above 21.000 kV")]


def test_saturated_readbacks_trip_after_their_time() -> None:
    """Codes at the converter's limit on either channel for the stated time are saturated."""
    guard = Guard(limits(overvoltage=40000, overcurrent=40000))
    assert len(judged(guard, HostRule.SATURATED, ([32767] * 9 + [0] + [32767] * 10, [0] * 20))) == 1
    guard = Guard(limits(overvoltage=40000, overcurrent=40000))
    found = judged(guard, HostRule.SATURATED, ([0] * 20, [0] * 5 + [32767] * 15))
    assert [(x.index, x.text) for x in found] == [(14, "current readback at the converter's limit for 0.01 s")]


def test_a_reversed_voltage_trips_and_the_band_does_not() -> None:
    """Codes below minus the zero band are reversed; codes at its edge are zero."""
    assert not judged(Guard(limits()), HostRule.REVERSED, ([-50] * 32, [0] * 32))
    assert len(judged(Guard(limits()), HostRule.REVERSED, ([-51] * 32, [0] * 32))) == 1


def test_a_load_that_discharges_into_the_bench_is_not_reversed() -> None:
    """A backward current counts only where the readback is not above the set-point."""
    assert not judged(Guard(limits()), HostRule.REVERSED, ([12000] * 32, [-400] * 32))
    assert len(judged(Guard(limits()), HostRule.REVERSED, ([10000] * 32, [-400] * 32))) == 1


def test_an_overcurrent_with_a_collapse_is_left_to_the_arc() -> None:
    """Where arcs may pause, an overcurrent within w samples of a collapse is an event and the breakdown acts."""
    v, i = [10000] * 20 + [2000] * 12, [10] * 19 + [4000] * 3 + [10] * 10
    found = Guard(limits(arc_wait=True)).judge(block(0, v, i, v_word=10000))
    assert {x.rule: x.severity for x in found} == {
        HostRule.BREAKDOWN: Severity.ARC, HostRule.OVERCURRENT: Severity.EVENT}
    found = Guard(limits()).judge(block(0, v, i, v_word=10000))
    assert {x.rule: x.severity for x in found} == {
        HostRule.BREAKDOWN: Severity.ARC, HostRule.OVERCURRENT: Severity.TRIP}


def test_an_overcurrent_at_a_blocks_end_waits_for_its_collapse() -> None:
    """With pausing allowed it waits at most w samples: a collapse makes it an event, none makes it a trip."""
    head = block(0, QUIET_V, [10] * 30 + [4000] * 2, v_word=10000)
    for tail, severity in (([10000] + [2000] * 31, Severity.EVENT), (QUIET_V, Severity.TRIP)):
        guard = Guard(limits(arc_wait=True))
        assert guard.judge(head) == ()
        found = [x for x in guard.judge(block(32, tail, [10] * 32, v_word=10000)) if x.rule is HostRule.OVERCURRENT]
        assert [(x.severity, x.index) for x in found] == [(severity, 31)]


def test_a_waiting_overcurrent_that_the_mcu_paused_for_is_an_event() -> None:
    """When the next block says pausing, the MCU has taken it as an arc."""
    guard = Guard(limits(arc_wait=True))
    assert guard.judge(block(0, QUIET_V, [10] * 30 + [4000] * 2, v_word=10000)) == ()
    found = guard.judge(block(32, QUIET_V, [10] * 32, v_word=0, state=McuState.PAUSING))
    assert [(x.rule, x.severity) for x in found] == [(HostRule.OVERCURRENT, Severity.EVENT)]
