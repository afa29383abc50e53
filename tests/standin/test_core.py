"""The acts that end things: their order, their idempotence, and the counters' wraps."""

from hypothesis import given
from hypothesis import strategies as st

from hvhost.standin.core import NEVER, Timer
from hvhost.wire.vocabulary import CutWhy, McuState
from tests.standin.fakes import Bench


def test_the_cut_asserts_inhibit_then_zeroes_words_then_drops_the_relay():
    """In one tick: inhibit and clear first, words to zero, the power relay last (PROTOCOL 7.7)."""
    bench = Bench().energised()
    core = bench.mcu.core
    seen = []
    board = bench.board
    drive = board.drive

    def watch(*, inhibit: bool, clear: bool, relay: bool) -> None:
        seen.append((core.now, inhibit, clear, relay, core.v_word))
        drive(inhibit=inhibit, clear=clear, relay=relay)

    board.drive = watch
    tick = bench.tick
    bench.cut()
    assert seen == [(tick, True, True, True, 20000), (tick, True, True, False, 0)]


def test_a_cut_repeated_changes_and_tells_nothing():
    """A cut in the cut position is executed and answered, and is no second event."""
    bench = Bench().energised()
    bench.cut()
    cuts = bench.kinds().count("cut")
    for _ in range(3):
        bench.line(f"cut {bench.stop} 0")
    assert bench.kinds().count("cut") == cuts
    assert bench.dead
    assert [a.n for a in bench.answers[-4:]] == [bench.stop] * 4


def test_an_operators_cut_is_no_latch_a_host_rules_is():
    """Rule 0 latches nothing, any other latches `host` with its number (PROTOCOL 7.9)."""
    bench = Bench().energised()
    bench.cut()
    assert not bench.mcu.latched
    bench = Bench().energised()
    bench.cut(rule=15)
    assert bench.mcu.latched.name == "HOST_RULE"
    assert bench.ask("info", "3").pairs["rule"] == "15"
    assert bench.dead


@given(st.integers(0, 0xFFFFFFFF), st.integers(-1000, 1000))
def test_indices_unwrap_to_the_nearest(base, offset):
    """The low 32 bits of a near index give the index itself, across the wrap too."""
    core = Bench(hello=False).mcu.core
    core.index = base + (1 << 32)
    assert core.unwrap((core.index + offset) & 0xFFFFFFFF) == core.index + offset


def test_timers_keep_the_nearest_due():
    """`due` is always the earliest timer, and never when none is set."""
    core = Bench(hello=False).mcu.core
    for timer in list(core.timers):
        core.stop_timer(timer)
    assert core.due == NEVER
    core.set_timer(Timer.WARN, 50)
    core.set_timer(Timer.LEASE, 20)
    assert core.due == 20
    core.stop_timer(Timer.LEASE)
    assert core.due == 50


def test_a_lower_while_waiting_for_the_press_is_a_cut():
    """`arm --cancel` is a stop: the arm is void, the state off, nothing latched (PROTOCOL 7.15)."""
    bench = Bench()
    assert bench.arm() == ""
    bench.lower()
    assert bench.state is McuState.OFF
    assert bench.event("cut").a == CutWhy.PREPARING
    assert bench.event("void").a == 1
    assert not bench.mcu.latched
