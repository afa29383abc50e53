"""The guard as a whole: states, announced turns, limits changed in mid-run, determinism."""

from dataclasses import replace

from hypothesis import given
from hypothesis import strategies as st

from hvhost.guard.guard import TURNS_MAX, Guard
from hvhost.guard.verdicts import Severity
from hvhost.wire.vocabulary import EventKind, HostRule, McuState
from tests.guard.build import block, cut, limits

HIGH = [4000] * 32


def test_quiet_blocks_are_silent_in_every_state() -> None:
    """Readbacks at zero and no words: no state finds anything."""
    for state in McuState:
        guard = Guard(limits(deviation=300, follow_word=1000, follow_q16=32768, stuck_samples=64))
        assert all(guard.judge(block(32 * k, [0, 1] * 16, [0] * 32, state=state)) == () for k in range(50))


def test_an_unknown_state_is_judged_by_every_rule() -> None:
    """A state number that this host does not know loosens nothing."""
    guard = Guard(limits())
    rules = {x.rule for x in guard.judge(block(0, [10000] * 20 + [0] * 12, HIGH, v_word=10000, state=99))}
    assert {HostRule.OVERCURRENT, HostRule.BREAKDOWN, HostRule.MISSING} <= rules
    guard.judge(block(32, [0] * 32, [0] * 32, state=99, arrival_s=1.0))
    assert guard.check_time(9.0)[0].severity is Severity.TRIP


def test_a_rule_that_was_not_live_begins_anew() -> None:
    """What lasted before the output went off is told again when it lasts after it came on."""
    guard = Guard(limits())
    assert guard.judge(block(0, [0] * 32, HIGH))
    assert guard.judge(block(32, [0] * 32, HIGH, state=McuState.OFF)) == ()
    assert [x.index for x in guard.judge(block(64, [0] * 32, HIGH))] == [65]


def test_counts_of_interference_outlive_states() -> None:
    """Interfering samples stay counted through an off state."""
    guard = Guard(limits())
    guard.judge(block(0, [0] * 32, [0] * 8 + [4000] + [0] * 23))
    guard.judge(block(32, [0] * 32, [0] * 32, state=McuState.OFF))
    assert guard.interfering == {HostRule.OVERCURRENT: 1}


def test_a_cut_in_the_middle_of_a_block_ends_the_rules_for_what_follows() -> None:
    """After the tick of an announced cut the bench's own discharge is no breakdown; without it, it is one."""
    v = [10000] * 16 + [10000 - 500 * k for k in range(1, 17)]
    each = block(0, v, [10] * 32, v_word=10000)
    assert [x.rule for x in Guard(limits()).judge(each)] == [HostRule.BREAKDOWN]
    guard = Guard(limits())
    guard.heard(EventKind.CUT, 155)
    assert guard.judge(each) == ()


def test_a_turn_is_used_in_its_own_block_only() -> None:
    """An announced state that the next block contradicts is forgotten: the block's own state stands."""
    guard = Guard(limits())
    guard.heard(EventKind.CUT, 155)
    guard.judge(block(0, [0] * 32, [0] * 32))
    assert [x.rule for x in guard.judge(block(32, [0] * 32, HIGH))] == [HostRule.OVERCURRENT]


def test_turns_are_bounded_and_other_events_are_none() -> None:
    """However many changes are announced, few wait; events that change no state are not kept."""
    guard = Guard(limits())
    for tick in range(1000):
        guard.heard(EventKind.ENERGISED, 10_000 + tick)
        guard.heard(EventKind.SEGMENT, 10_000 + tick)
    assert len(guard.snapshot().turns) == TURNS_MAX


@given(st.lists(st.integers(1, 63), min_size=1, max_size=4))
def test_turns_that_change_nothing_change_nothing(at: list[int]) -> None:
    """Cutting a block at announced ticks into parts of the same state leads to the same verdicts."""
    v, i = [10000] * 20 + [1000] * 5 + [10000] * 39, [10] * 50 + [4000] * 3 + [10] * 11
    each = block(0, v, i, v_word=10000)
    guard = Guard(limits())
    for k in at:
        guard.heard(EventKind.ENERGISED, 10 * k)
    assert guard.judge(each) == Guard(limits()).judge(each)


def test_tighter_limits_hold_from_the_next_block_on() -> None:
    """Limits may change in mid-run; an excursion that is on counts on."""
    guard = Guard(limits(persist=3))
    assert guard.judge(block(0, [0] * 2, [4000] * 2)) == ()
    guard.with_limits(limits(persist=2))
    assert [x.rule for x in guard.judge(block(2, [0] * 8, [4000] * 8))] == [HostRule.OVERCURRENT]
    guard.with_limits(limits(overvoltage=500))
    assert [x.rule for x in guard.judge(block(10, [600] * 8, [0] * 8))] == [HostRule.OVERVOLTAGE]


def test_the_guard_keeps_no_more_blocks_than_it_may_look_back_on() -> None:
    """Memory is bounded by the window, whatever the length of the blocks, and no chain of blocks is held."""
    for size in (1, 8, 64):
        guard = Guard(limits())
        for each in cut([0] * 1024, [0] * 1024, [0] * 1024, size):
            guard.judge(each)
        kept = guard.snapshot().before
        assert sum(len(view.v) for view in kept) <= 15 + size
        assert all(view.before == () for view in kept)


def test_a_verdict_in_one_rule_does_not_hide_another() -> None:
    """Every rule of a block is judged; verdicts come in the order of the table."""
    v, i = [10000] * 20 + [100] * 12, [10] * 20 + [4000] * 12
    each = replace(block(0, v, i, v_word=10000, inputs=0), gap=200)
    assert [x.rule for x in Guard(limits()).judge(each)] == [
        HostRule.BREAKDOWN, HostRule.OVERCURRENT, HostRule.INTERLOCK, HostRule.GROUNDING, HostRule.AUXILIARY,
        HostRule.GAP]
