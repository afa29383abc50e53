"""The MCU as a whole: boot, resets at any moment, wraps, determinism, and what never happens."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.standin.eeprom import Eeprom
from hvhost.wire.vocabulary import Cause, McuState, ResetCause
from tests.standin.fakes import SETTINGS, Bench


def test_every_boot_latches_restarted_and_counts():
    """Power on, brown-out, watchdog: each is told with its cause and latched (PROTOCOL 12.7)."""
    bench = Bench()
    for number, cause in enumerate(ResetCause, start=2):
        bench.mcu.reset(cause)
        bench.collect()
        assert bench.event("boot").a == cause
        assert bench.event("boot").b == number
        assert bench.mcu.latched == Cause.RESTARTED


def test_the_first_act_of_a_boot_is_the_cut():
    """A reset in mid-run: outputs are in their cut position before anything else (PROTOCOL 12.6)."""
    bench = Bench().energised()
    bench.mcu.reset(ResetCause.WATCHDOG)
    assert bench.dead
    assert bench.state is McuState.OFF


def test_a_boot_while_energised_says_that_causes_may_be_missing():
    """Power lost and back while energised: the mark stood, so it is said, with the run's tag (PROTOCOL 12.7, 12.8)."""
    bench = Bench().energised()
    bench.mcu.reset(ResetCause.POWER)
    assert bench.mcu.latched == Cause.RESTARTED | Cause.RESTARTED_ENERGISED
    assert bench.eeprom.kept.tag == 0xABCD1234
    assert bench.eeprom.kept.mark == 0
    bench.hello(session=4)
    bench.pass_ms(2_000)
    assert bench.dead
    assert bench.ask("info", "3").pairs["tag"] == "ABCD1234"
    assert bench.arm() == "latched"


def test_a_boot_after_an_orderly_end_belongs_to_no_run():
    """The mark and the tag go with the run's unlatched end."""
    bench = Bench().energised()
    bench.lower()
    bench.pass_ms(1_100)
    bench.mcu.reset(ResetCause.POWER)
    assert bench.mcu.latched == Cause.RESTARTED
    assert bench.eeprom.kept.tag == 0


def test_causes_outlive_boots_until_a_reset_names_them():
    """A trip, then three boots: the set is whole and still the run's (PROTOCOL 12.2)."""
    bench = Bench().energised()
    bench.cut(rule=4)
    for _ in range(3):
        bench.mcu.reset(ResetCause.BROWN_OUT)
    assert bench.mcu.latched == Cause.HOST_RULE | Cause.RESTARTED
    assert bench.eeprom.kept.tag == 0xABCD1234
    bench.hello(session=4)
    bench.pass_ms(2_500)
    assert bench.code("reset", f"{bench.causes:08X} 0") == ""
    bench.mcu.reset(ResetCause.BROWN_OUT)
    assert bench.mcu.latched == Cause.RESTARTED


@pytest.mark.parametrize("state", ["REQUESTED", "WARNING", "ENERGISED", "PAUSING", "LOWERING"])
def test_nothing_resumes_after_a_boot(state):
    """In whatever state the reset comes, the old arm, queue and session are gone (S4, S8)."""
    bench = Bench()
    if state == "REQUESTED":
        bench.arm()
    elif state == "WARNING":
        bench.warned()
        bench.seg(1_000)
    else:
        bench.energised(pause=(3, 300, 10_000))
        bench.seg(30_000)
        if state == "PAUSING":
            bench.arc(bench.mcu.core.index)
        if state == "LOWERING":
            bench.lower()
    assert bench.state is McuState[state]
    bench.mcu.reset(ResetCause.EXTERNAL)
    bench.board.outputs.clear()
    assert bench.code("seg", "100 100 1000", n=bench.n + 1) == "session"
    bench.pass_ms(5_000)
    assert all(inhibit and not relay and volts == 0 for volts, inhibit, relay in bench.board.outputs)


def test_held_in_reset_the_wiring_inhibits_and_nothing_is_served():
    """MCU absent: outputs dead, bytes unheard, until the boot (PROTOCOL 7.17)."""
    bench = Bench().energised()
    bench.mcu.hold_reset()
    assert bench.dead
    bench.mcu.take_output()
    bench.mcu.feed(b"\n", bench.tick + 10_000)
    assert bench.mcu.take_output() == b""
    bench.mcu.reset(ResetCause.EXTERNAL)
    bench.pass_ms(10)
    assert bench.mcu.latched & Cause.RESTARTED_ENERGISED


def test_an_mcu_that_stood_still_counts_what_it_missed_and_then_lapses():
    """Stopped and continued: missed conversions take indices, overdue timers are served at once."""
    bench = Bench().energised()
    index = bench.mcu.core.index
    bench.mcu.halted = True
    bench.mcu.advance_to(bench.tick + 7_000)
    bench.mcu.halted = False
    bench.pass_ms(2)
    assert bench.mcu.core.missed >= 699
    assert bench.mcu.core.index - index >= 700
    assert bench.state is McuState.LOWERING
    assert bench.mcu.latched == Cause.HOST_SILENT


@pytest.mark.parametrize("start", [(1 << 31) - 20_000, (1 << 32) - 20_000, (1 << 32) - 500])
def test_counters_wrap_without_a_trace(start):
    """A run across the wrap of ticks and indices: no gap, no lapse, no trip (PROTOCOL 1.4)."""
    bench = Bench(first_tick=start, first_index=start).energised()
    bench.pass_ms(1_000)
    assert bench.state is McuState.ENERGISED
    follows = bench.blocks[0].index
    for block in bench.blocks:
        assert block.index == follows
        follows = (follows + block.pairs) & 0xFFFFFFFF
    bench.lower()
    bench.pass_ms(1_100)
    assert bench.dead
    assert not bench.mcu.latched


def test_the_same_calls_give_the_same_bytes():
    """Deterministic, and however coarsely time is advanced."""
    def bytes_of(step: int) -> bytes:
        bench = Bench()
        bench.arm()
        bench.renewing = False
        out = b""
        for _ in range(6_000 // step):
            bench.mcu.advance_to(bench.tick + step)
            out += bench.mcu.take_output()
        return out

    assert bytes_of(1) == bytes_of(1) == bytes_of(600) == bytes_of(3_000)


def test_a_command_acts_at_the_tick_at_which_it_is_fed():
    """Between two samples too: the cut is at its own tick."""
    bench = Bench().energised()
    tick = bench.tick + 7
    bench.mcu.feed(b"\n", tick)
    bench.cut()
    assert bench.event("cut").tick == tick
    assert bench.dead


ACTS = st.tuples(st.sampled_from(["cut", "lower", "arc", "seg", "arcseg", "arm", "hello", "silence", "interlock", "v0",
                                  "reset", "wait", "boot"]), st.integers(0, 60_000), st.integers(1, 600))


@settings(max_examples=60, deadline=None)
@given(st.lists(ACTS, max_size=12), st.booleans())
def test_after_a_cut_no_word_is_written_and_the_relay_stays_open(acts, pause):
    """Until a new arm was pressed, whatever the host sends or the bench does (PROTOCOL 7.8, S3)."""
    bench = Bench().energised(v=10_000, pause=(2, 200, 10_000) if pause else None)
    dead = False
    for act, a, b in acts:
        if act == "cut":
            bench.cut(rule=a % 3)
        elif act == "lower":
            bench.lower()
        elif act == "arc":
            bench.arc(bench.mcu.core.index - b % 5)
        elif act in ("seg", "arcseg"):
            bench.seg(a, a, b * 100, arc=bench.mcu.core.reaction.number if act == "arcseg" else None)
        elif act == "arm":
            bench.arm()
        elif act == "hello":
            bench.hello(session=a + 1)
        elif act == "silence":
            bench.renewing = b % 2 == 0
        elif act == "interlock":
            bench.board.contacts ^= 1
        elif act == "v0":
            bench.board.level = 0.0
        elif act == "reset":
            bench.code("reset", f"{bench.causes:08X} 1")
        elif act == "boot":
            bench.mcu.reset(ResetCause.WATCHDOG)
        bench.pass_ms(b if act == "wait" else 3)
        dead = dead or bench.state is McuState.OFF
        if dead:
            assert bench.state in (McuState.OFF, McuState.REQUESTED)
            assert bench.mcu.v_word == 0
            assert bench.board.inhibit
            assert not bench.board.relay


def test_an_eeprom_moves_from_one_mcu_to_the_next():
    """The settings and the latch live in the EEPROM, not in the MCU."""
    bench = Bench().energised()
    bench.cut(rule=4)
    again = Bench(eeprom=bench.eeprom, clear=False)
    assert again.mcu.latched & Cause.HOST_RULE
    assert isinstance(again.eeprom, Eeprom)
    assert again.eeprom.settings == SETTINGS
