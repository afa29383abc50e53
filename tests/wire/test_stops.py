"""The three stops: order, repetition, escalation, confirmation."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.wire.events import CutState
from hvhost.wire.frames import ArcSeen, Cut, Lower, McuEvent, Ok, Refusal, encode_request
from hvhost.wire.lines import seal
from hvhost.wire.stops import ARCS_MAX, ESCALATE_S, REPEAT_S, Stops, in_cut_position
from hvhost.wire.vocabulary import Fitted, HostRule, Inputs, McuState
from tests.wire.device import BACKS, CUT_POSITION, block


def line(body: str) -> bytes:
    """Return a stop as it leaves: LF, then the line."""
    return b"\n" + seal(body.encode("ascii"))


@given(st.integers(0, 2**32 - 1), st.integers(1, 2**32 - 1), st.integers(0, 2**32 - 1), st.integers(0, 99))
def test_stops_are_written_as_the_table_of_requests_writes_them(number: int, session: int, index: int,
                                                                rule: int) -> None:
    """Their short way may not differ from the grammar's one writer."""
    for decide, frame in ((lambda s: s.cut(rule, 0.0), Cut(n=number, rule=rule)),
                          (lambda s: s.lower(0.0), Lower(n=number, session=session)),
                          (lambda s: s.arc(index, 0.0), ArcSeen(n=number, session=session, index=index))):
        stops = Stops(session, number)
        decide(stops)
        assert stops.due(0.0) == b"\n" + seal(encode_request(frame))


def test_a_cut_is_repeated_every_20_ms_until_answered() -> None:
    """The same bytes, LF first, at each 20 ms, and no more after the answer with its number."""
    stops = Stops(7, 5)
    assert stops.cut(0, 1.0) == 5
    assert stops.due(1.0) == line("cut 5 0")
    assert stops.due(1.0 + REPEAT_S / 2) == b""
    assert stops.deadline() == 1.0 + REPEAT_S
    assert stops.due(1.0 + REPEAT_S) == line("cut 5 0")
    assert not stops.answer(Ok(n=4, verb="cut"))
    assert stops.answer(Ok(n=5, verb="cut"))
    assert stops.due(2.0) == b""
    assert stops.deadline() is None
    assert not stops.answer(Ok(n=5, verb="cut"))


def test_a_refused_cut_goes_on() -> None:
    """A cut is never given up for a refusal."""
    stops = Stops(7, 1)
    stops.cut(0, 0.0)
    stops.due(0.0)
    assert stops.answer(Refusal(n=1, verb="cut", code="session"))
    assert stops.due(1.0) == line("cut 1 0")
    assert stops.cut_state is CutState.SENT


def test_the_cut_leaves_first_and_overtakes_what_waits() -> None:
    """A cut takes the place of a waiting lower and of waiting arcs."""
    stops = Stops(7, 1)
    stops.lower(0.0)
    stops.arc(99, 0.0)
    assert stops.due(0.0) == line("lower 1 00000007") + line("arc 2 00000007 99")
    stops.cut(3, 0.01)
    assert stops.due(0.03) == line("cut 3 3")
    assert not stops.answer(Ok(n=1, verb="lower"))


def test_a_rule_overrules_an_operator_and_absorbs_later_cuts() -> None:
    """The cut that latches is not lost behind one that does not, and the first cause stays the first."""
    stops = Stops(7, 1)
    assert stops.cut(HostRule.OPERATOR, 0.0) == 1
    assert stops.cut(HostRule.OPERATOR, 0.0) == 1
    assert stops.cut(HostRule.OVERCURRENT, 0.0) == 2
    assert stops.cut(HostRule.OVERVOLTAGE, 0.0) == 2
    assert stops.cut(HostRule.OPERATOR, 0.0) == 2
    assert stops.due(0.0) == line("cut 2 1")
    assert stops.lower(0.0) == 2
    assert stops.arc(5, 0.0) == 2
    assert stops.due(0.0) == b""


@pytest.mark.parametrize("verb", ["lower", "arc"])
def test_lower_and_arc_are_overdue_after_100_ms(verb: str) -> None:
    """Unanswered 100 ms after the decision they are overdue; answered, they are not."""
    stops = Stops(7, 1)
    if verb == "lower":
        stops.lower(1.0)
    else:
        stops.arc(5, 1.0)
    stops.due(1.0)
    assert stops.overdue(1.0 + ESCALATE_S - 0.001) is None
    assert stops.overdue(1.0 + ESCALATE_S) == (verb, 1)
    assert stops.answer(Ok(n=1, verb=verb, words=("0",)))
    assert stops.overdue(9.0) is None
    assert not stops.waiting


def test_a_second_lower_while_one_waits_is_the_same() -> None:
    """Pressing the key twice sends one number."""
    stops = Stops(7, 1)
    assert stops.lower(0.0) == stops.lower(0.01) == 1
    assert stops.answer(Ok(n=1, verb="lower"))
    assert stops.lower(0.5) == 2


def test_too_many_arcs_cut() -> None:
    """Arcs that wait are bounded: one more cuts."""
    stops = Stops(7, 1)
    for k in range(ARCS_MAX):
        stops.arc(k, 0.0)
    stops.arc(99, 0.0)
    assert stops.due(0.0) == line(f"cut {ARCS_MAX + 1} 4")


FIT = Fitted(BACKS)


def test_confirmed_by_the_answer_and_a_later_block() -> None:
    """The first block after the answer may have begun before the cut; the second cannot have."""
    stops = Stops(7, 1)
    stops.cut(0, 0.0)
    assert stops.cutting
    assert not stops.look(block(0), FIT)
    stops.answer(Ok(n=1, verb="cut"))
    assert stops.cut_state is CutState.ANSWERED
    assert stops.cutting
    assert not stops.look(block(32), FIT)
    assert stops.look(block(64), FIT)
    assert stops.cut_state is CutState.CONFIRMED
    assert not stops.cutting


@pytest.mark.parametrize(("tick", "later"), [(1000, False), (1001, True), (999, False), (0xFFFFFFF0, False)])
def test_the_event_of_the_cut_tells_which_block_is_later(tick: int, later: bool) -> None:
    """With the event's tick, the first block that begins after it confirms, across the wrap too."""
    stops = Stops(7, 4)
    stops.cut(0, 0.0)
    stops.event(McuEvent(number=9, tick=1000, kind="cut", a=1, b=4))
    stops.answer(Ok(n=4, verb="cut"))
    assert stops.look(block(1, tick=tick), FIT) is later


def test_the_event_of_another_cut_tells_nothing() -> None:
    """Another stop number or another kind is not this cut."""
    stops = Stops(7, 4)
    stops.cut(0, 0.0)
    stops.event(McuEvent(number=9, tick=1000, kind="cut", a=1, b=3))
    stops.event(McuEvent(number=9, tick=1000, kind="lowering", a=1, b=4))
    stops.answer(Ok(n=4, verb="cut"))
    assert not stops.look(block(1, tick=2000), FIT)


@pytest.mark.parametrize(("state", "v", "inputs", "fitted", "good"), [
    (0, 0, CUT_POSITION, FIT, True),
    (4, 0, CUT_POSITION, FIT, False),
    (0, 1, CUT_POSITION, FIT, False),
    (0, 0, 0, FIT, False),
    (0, 0, CUT_POSITION | Inputs.RELAY_BACK, FIT, False),
    (0, 0, CUT_POSITION | Inputs.DANGER, FIT, False),
    (0, 0, CUT_POSITION | Inputs.DANGER, FIT & ~Fitted.DANGER_FROM_RELAY, True),
    (0, 0, 0, Fitted(0), True),
    (0, 0, CUT_POSITION | Inputs.RELAY_BACK, FIT & ~Fitted.RELAY_BACK, True),
])
def test_every_fitted_readback_counts(state: int, v: int, inputs: int, fitted: Fitted, good: bool) -> None:
    """State off, words at zero, inhibit asserted, relay open, and the relay's danger signal dark, where fitted."""
    assert in_cut_position(block(1, state=McuState(state), v=v, inputs=int(inputs)), fitted) is good


def test_unknown_readbacks_confirm_nothing() -> None:
    """Where the settings are unknown no block confirms a cut."""
    stops = Stops(7, 1)
    stops.cut(0, 0.0)
    stops.answer(Ok(n=1, verb="cut"))
    assert not any(stops.look(block(32 * k), None) for k in range(5))


def test_a_new_cut_starts_over() -> None:
    """A confirmed cut does not confirm the next one."""
    stops = Stops(7, 1)
    stops.cut(0, 0.0)
    stops.answer(Ok(n=1, verb="cut"))
    stops.look(block(0), FIT)
    stops.look(block(32), FIT)
    assert stops.cut(0, 1.0) == 2
    assert stops.cut_state is CutState.SENT
    assert stops.next_number == 3


def test_the_deadline_is_the_repeat_or_the_escalation() -> None:
    """A lower wakes its caller every 20 ms and at 100 ms; a cut only for its repeats."""
    stops = Stops(7, 1)
    stops.lower(1.0)
    stops.due(1.0)
    assert stops.deadline() == 1.0 + REPEAT_S
    stops.due(1.09)
    assert stops.deadline() == 1.0 + ESCALATE_S
    stops.cut(0, 2.0)
    stops.due(2.09)
    assert stops.deadline() == 2.09 + REPEAT_S
