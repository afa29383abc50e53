"""The latch: first cause, whole set, evidence, and everything that stands against a reset."""

import pytest

from hvhost.wire.vocabulary import Cause, Fitted, Inputs, McuState
from tests.standin.fakes import ALL, SETTINGS, Bench


def tripped(settings=SETTINGS) -> Bench:
    """Energised, then cut by an overcurrent; discharged since."""
    bench = Bench(settings, clear=False)
    bench.pass_ms(300)
    bench.eeprom.keep(causes=0)
    bench.energised()
    bench.board.i = 25_000
    bench.pass_ms(3)
    bench.board.i = None
    bench.pass_ms(4_000)
    return bench


def reset(bench: Bench, causes: int | None = None, grounded: int = 0) -> str:
    return bench.code("reset", f"{bench.causes if causes is None else causes:08X} {grounded}")


def test_a_trip_keeps_first_cause_set_tick_codes_and_tag():
    """What the record needs is in EEPROM with the cut (PROTOCOL 12.1)."""
    bench = Bench().energised()
    bench.board.i = 25_000
    bench.pass_ms(3)
    bench.board.forced[Inputs.DANGER] = True
    bench.pass_ms(300)
    kept = bench.eeprom.kept
    assert kept.causes == Cause.OVERCURRENT | Cause.POWER_STILL_ON
    assert kept.first == Cause.OVERCURRENT
    assert kept.i_code == 25_000
    assert kept.v_code in (10_000, 10_001)
    assert kept.tag == 0xABCD1234
    assert kept.tick == next(event.tick for event in bench.events if event.kind == "cut")
    assert kept.mark == 0


def test_a_reset_names_the_whole_set():
    """Fewer or more causes than stand are refused (PROTOCOL 12.3, S3)."""
    bench = tripped()
    assert reset(bench, int(Cause.BREAKDOWN)) == "causes"
    assert reset(bench, int(Cause.OVERCURRENT | Cause.BREAKDOWN)) == "causes"
    assert reset(bench, 0) == "causes"
    assert bench.mcu.latched
    assert reset(bench) == ""
    assert not bench.mcu.latched
    assert bench.event("reset").a == Cause.OVERCURRENT


@pytest.mark.parametrize(("case", "code"), [
    ("inhibit", "position"), ("relay", "position"), ("danger", "position"), ("zero", "zero"),
    ("interlock open", "interlock"), ("interlock just closed", "interlock")])
def test_each_ground_refuses_a_reset_and_operates_nothing(case, code):
    """Every read-back in its cut position, zero band, interlock closed for 100 ms (PROTOCOL 12.4)."""
    bench = tripped()
    board = bench.board
    forced = {"inhibit": (Inputs.INHIBIT_BACK, False), "relay": (Inputs.RELAY_BACK, True),
              "danger": (Inputs.DANGER, True)}
    if case in forced:
        bit, level = forced[case]
        board.forced[bit] = level
    elif case == "zero":
        board.v = 61
    else:
        board.open(Inputs.INTERLOCK)
        bench.pass_ms(50)
        if case == "interlock just closed":
            board.close(Inputs.INTERLOCK)
            bench.pass_ms(98)
    bench.pass_ms(1)
    outputs = (board.inhibit, board.clear, board.relay)
    assert reset(bench) == code
    assert (board.inhibit, board.clear, board.relay) == outputs
    assert bench.mcu.latched
    if case == "interlock just closed":
        bench.pass_ms(2)
        assert reset(bench) == ""


def test_a_reset_while_lowering_is_refused():
    """Host silent latches while the lower goes on: not before it is off (PROTOCOL 12.4)."""
    bench = Bench().energised()
    bench.renewing = False
    bench.pass_ms(520)
    assert bench.state is McuState.LOWERING
    assert reset(bench) == "state"


@pytest.mark.parametrize("lacks", [Fitted.MONITOR_POWERED, Fitted.MONITOR_AT_SPECIMEN])
def test_where_the_voltage_is_not_measured_bleed_times_and_a_declaration_are_needed(lacks):
    """Five bleed times since the cut and 'grounded by hand' (PROTOCOL 12.5)."""
    bench = Bench(SETTINGS.with_(fitted=ALL & ~lacks), clear=False)
    bench.pass_ms(200)
    assert reset(bench) == "grounded"
    assert reset(bench, grounded=1) == "bleed"
    bench.pass_ms(2_290)
    assert reset(bench, grounded=1) == "bleed"
    bench.pass_ms(20)
    assert reset(bench) == "grounded"
    assert reset(bench, grounded=1) == ""
    assert bench.event("reset").b == 1


def test_while_a_latch_stands_arms_and_segments_are_refused():
    """Nothing leads on but the reset and a fresh arm (S3)."""
    bench = tripped()
    assert bench.arm() == "latched"
    assert bench.seg(100) == "state"
    reset(bench)
    assert bench.seg(100) == "state"
    bench.energised()
    assert bench.state is McuState.ENERGISED


def test_a_cause_that_stands_already_is_told_once():
    """Causes are a set: a host's cut repeated is one cause (PROTOCOL 7.3)."""
    bench = Bench().energised()
    for _ in range(4):
        bench.cut(rule=3)
    assert bench.kinds().count("cause") == 2  # restarted at the boot, and this one
