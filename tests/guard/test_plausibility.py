"""Rules that compare the readback with the set-point."""

from hvhost.guard.guard import Guard
from hvhost.guard.verdicts import Severity, Verdict
from hvhost.wire.vocabulary import HostRule
from tests.guard.build import block, limits


def judged(guard: Guard, rule: HostRule, v: list[int], word: int, i: int = 10, start: int = 0) -> list[Verdict]:
    """The verdicts of one rule over a stream at one set-point, in blocks of 32."""
    return [x for at in range(0, len(v), 32) for x in guard.judge(
        block(start + at, v[at:at + 32], [i] * 32, v_word=word)) if x.rule is rule]


def deviating(**changes: int) -> Guard:
    """A guard that watches deviations of 300 codes lasting 64 samples."""
    return Guard(limits(deviation=300, deviation_samples=64, **changes))


def test_held_down_is_an_event_told_once() -> None:
    """A front panel's lower set-point wins: no fault, one event after the stated time at rest."""
    found = judged(deviating(), HostRule.DEVIATION, [8000] * 320, 10000)
    assert [(x.severity, x.index, x.text) for x in found] == [
        (Severity.EVENT, 95, "held down: 8.000 kV with 10.000 kV set")]


def test_current_limit_is_named() -> None:
    """The same with the current at its set-point is the supply in current limit."""
    found = judged(deviating(overcurrent=9000), HostRule.DEVIATION, [8000] * 320, 10000, i=3950)
    assert [x.text for x in found] == ["in current limit: 8.000 kV with 10.000 kV set"]


def test_slow_to_fall_is_an_event_and_rising_is_a_trip() -> None:
    """A charged load that the supply cannot pull down is an event; a readback that rises by itself trips."""
    slow = judged(deviating(), HostRule.DEVIATION, [14000 - k for k in range(320)], 10000)
    assert [(x.severity, x.text[:12]) for x in slow] == [(Severity.EVENT, "slow to fall")]
    rising = judged(deviating(), HostRule.DEVIATION, [10000 + 10 * k for k in range(320)], 10000)
    assert [x.severity for x in rising] == [Severity.EVENT, Severity.TRIP]
    assert "rises above the set-point of 10.000 kV" in rising[-1].text


def test_nothing_deviates_while_the_words_move() -> None:
    """On a ramp the readback may lag as far as it likes: this rule is for rest."""
    guard = deviating()
    assert not [x for k in range(40) for x in guard.judge(block(32 * k, [100] * 32, [10] * 32, v_word=100 + 20 * k))
                if x.rule is HostRule.DEVIATION]


def ramp(guard: Guard, follow: int, start_v: int = 0) -> list[Verdict]:
    """Ramp the words from rest by 200 codes a block, the readback rising by ``follow`` a block."""
    found = list(guard.judge(block(0, [start_v] * 32, [10] * 32, v_word=0)))
    for k in range(20):
        found += guard.judge(block(32 * (k + 1), [start_v + follow * k] * 32, [10] * 32, v_word=200 * (k + 1)))
    return [x for x in found if x.rule is HostRule.NOT_FOLLOWING]


def test_a_ramp_that_the_readback_does_not_follow_trips_once() -> None:
    """In the first part of a ramp the readback shows at least its share of the rise, else it trips."""
    lim = limits(follow_word=1000, follow_q16=32768, missing_word=60000, deviation=0)
    assert not ramp(Guard(lim), 200)
    (found,) = ramp(Guard(lim), 10)
    assert (found.severity, found.limit) == (Severity.TRIP, 500)
    assert found.text == "readback 0.040 kV does not follow the set-point of 1.000 kV"


def test_a_load_still_charged_has_nothing_to_follow() -> None:
    """A ramp from below the voltage that a load still holds is not judged before the words reach it."""
    assert not ramp(Guard(limits(follow_word=1000, follow_q16=32768)), 0, start_v=3000)


def test_a_stuck_readback_trips_and_a_noisy_one_does_not() -> None:
    """One and the same code for the stated time at a set-point well above zero is a stuck readback."""
    lim = limits(stuck_samples=100)
    assert [x.index for x in judged(Guard(lim), HostRule.STUCK, [9000, 9001] * 3 + [9000] * 314, 9000)] == [105]
    assert not judged(Guard(lim), HostRule.STUCK, [9000, 9001] * 160, 9000)
    assert not judged(Guard(lim), HostRule.STUCK, [0] * 320, 0)


def test_a_missing_readback_trips_only_where_one_is_due() -> None:
    """Zero volts with the set-point above its threshold for the stated time is a missing readback."""
    assert [x.index for x in judged(Guard(limits()), HostRule.MISSING, [3] * 64, 1000)] == [9]
    assert not judged(Guard(limits()), HostRule.MISSING, [3] * 64, 999)
    assert not judged(Guard(limits()), HostRule.MISSING, ([3] * 9 + [51]) * 6 + [51] * 4, 1000)
